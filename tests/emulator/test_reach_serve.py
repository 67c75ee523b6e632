"""Serving an emulated box on a pseudo-terminal or a TCP port: pace, clients that come and go, ends."""

from __future__ import annotations

import json
import os
import socket
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
import serial
from tests.helpers import FILM_1U, plan, scenario

from dwellbench.bench import Bench, open_box
from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.link_fifo import OUT_BYTES
from dwellbench.emulator.opening import Opening
from dwellbench.emulator.outlet_pty import Pty
from dwellbench.emulator.outlet_tcp import Tcp
from dwellbench.emulator.serve import Outlet, serve
from dwellbench.errors import NoBoxError, UsageError
from dwellbench.wire.core import seal, unseal

SPEED = 10.0  # the silence that ends a run is then a fifth of a wall second, which a busy computer can keep
STATUS = seal({"jsonrpc": "2.0", "id": 1, "method": "status"})
Start = Callable[..., EmulatedBox]


@pytest.fixture
def start() -> Iterator[Start]:
    """Serves a box in a thread until the test is over."""
    threads, over = [], threading.Event()

    def begin(outlet: Outlet, url: str = "emu://film?seed=3", speed: float = SPEED) -> EmulatedBox:
        box = Opening.from_url(url).make(time_scale=speed)
        thread = threading.Thread(target=serve, args=(box, outlet, speed, over.is_set))
        thread.start()
        threads.append(thread)
        return box

    yield begin
    over.set()
    for thread in threads:
        thread.join(10)


def in_dwell(box: Bench, dwell: float) -> None:
    """Start a run on a 1 uF part and follow it into the dwell; again if a busy computer let the silence limit pass."""
    ends = []
    for _ in range(3):
        box.settle()
        run = box.start(plan(box, "1uF 630V film", dwell=dwell))
        for notice in run:
            if notice.method == "state" and notice.params["state"] == "dwell":
                return
        ends.append((run.end, run.fault))
        box.wait_for(lambda now: now["lid"] == "open", 60.0)
        box.wait_for(lambda now: now["lid"] == "closed", 60.0)
    raise AssertionError(f"it did not come to the dwell: {ends}")


def wait_until(done: Callable[[], bool], seconds: float = 20.0) -> None:
    end = time.monotonic() + seconds
    while not done():
        assert time.monotonic() < end
        time.sleep(0.005)


def test_virtual_time_keeps_step_with_the_clock(start: Start, tmp_path: Path) -> None:
    box = start(Pty(tmp_path / "bench"), speed=20.0)
    wait_until(lambda: box.now_s > 0)
    began, begin = box.now_s, time.monotonic()
    wait_until(lambda: time.monotonic() - begin > 0.5)
    assert box.now_s - began == pytest.approx(20.0 * (time.monotonic() - begin), rel=0.25)


def test_hello_says_how_fast_time_goes_and_the_host_keeps_to_it(start: Start) -> None:
    tcp = Tcp("127.0.0.1", 0)
    start(tcp)
    with open_box(tcp.name) as box:
        assert box.identity.hello["time_scale"] == f"{SPEED:g}"
        begin, wall = box.clock(), time.monotonic()
        box.rest(5.0)
        assert box.clock() - begin >= 5.0
        assert time.monotonic() - wall < 2.0


def test_a_second_host_is_told_by_name_what_is_wrong(start: Start) -> None:
    tcp = Tcp("127.0.0.1", 0)
    start(tcp)
    with open_box(tcp.name) as box:
        begin = time.monotonic()
        with pytest.raises(NoBoxError, match="in use by another program") as caught:
            open_box(tcp.name)
        assert caught.value.exit == 7
        assert time.monotonic() - begin < 5
        assert box.status()["boot"] == 1
    with open_box(tcp.name) as box:
        assert box.status()["boot"] == 1


def test_many_that_are_sent_away_all_hear_it(start: Start) -> None:
    tcp = Tcp("127.0.0.1", 0)
    box = start(tcp)
    host, port = tcp.name.removeprefix("socket://").split(":")
    first = socket.create_connection((host, int(port)))
    wait_until(lambda: box.link.attached)
    for _ in range(20):
        with socket.create_connection((host, int(port))) as other:
            other.sendall(b"\n" + STATUS)
            other.settimeout(5)
            line = b""
            while data := other.recv(500):
                line += data
            assert unseal(line.rstrip())["error"]["data"] == "another host is connected"
    first.close()
    wait_until(lambda: not box.link.attached)


def test_a_host_that_vanishes_in_mid_run_is_missed_after_two_seconds(start: Start, tmp_path: Path) -> None:
    tcp = Tcp("127.0.0.1", 0)
    emulated = start(tcp, scenario(tmp_path, FILM_1U) + "?seed=3")
    box = open_box(tcp.name)
    in_dwell(box, 120.0)
    truth = emulated.world.truth
    assert truth.part_V > 300
    box._link.close()
    wait_until(lambda: not emulated.in_run)
    assert abs(emulated.world.truth.part_V) < 30
    with open_box(tcp.name) as again:
        assert again.settle()["fault"] is None
        assert not emulated.world.truth.hurt


def test_an_unread_terminal_fills_and_the_box_goes_on_guarding(start: Start, tmp_path: Path) -> None:
    """Nobody reads: the terminal's buffer and the board's are full, no byte is dropped, and the run still ends for want of a host."""
    emulated = start(Pty(tmp_path / "bench"), scenario(tmp_path, FILM_1U) + "?seed=3")
    box = open_box(str(tmp_path / "bench"))
    in_dwell(box, 3000.0)
    port = box._link._port
    end = time.monotonic() + 20
    while len(emulated.link.out) < OUT_BYTES // 2 and time.monotonic() < end:
        port.write(seal({"jsonrpc": "2.0", "method": "keepalive"}))
        port.write(STATUS)
        time.sleep(0.02)
    assert len(emulated.link.out) >= OUT_BYTES // 2, "it is full"
    assert emulated.in_run
    wait_until(lambda: not emulated.in_run)
    assert abs(emulated.world.truth.part_V) < 30
    box.close()


def test_a_terminal_may_be_closed_in_mid_line_and_opened_again(start: Start, tmp_path: Path) -> None:
    start(Pty(tmp_path / "bench"))
    for _ in range(3):
        with serial.Serial(str(tmp_path / "bench"), timeout=5, exclusive=True) as port:
            port.write(STATUS[:40])
        with open_box(str(tmp_path / "bench")) as box:
            assert box.status()["boot"] == 1


def test_all_bytes_pass_a_terminal(start: Start, tmp_path: Path) -> None:
    """None of them means anything to it: not the interrupt, not flow control, not the end of a file."""
    start(Pty(tmp_path / "bench"))
    with serial.Serial(str(tmp_path / "bench"), timeout=5) as port:
        port.write(bytes(range(256)) + b"\n" + STATUS)
        lines = [port.read_until(b"\n") for _ in range(3)]
    assert [json.loads(line).get("id") for line in lines] == [None, None, 1]
    assert json.loads(lines[-1])["result"]["boot"] == 1


# ---- names and ends


def test_only_its_own_link_is_removed(tmp_path: Path) -> None:
    outlet = Pty(tmp_path / "bench")
    (tmp_path / "bench").unlink()
    (tmp_path / "bench").write_text("somebody else's", encoding="utf-8")
    outlet.close()
    assert (tmp_path / "bench").read_text(encoding="utf-8") == "somebody else's"


def test_a_link_that_another_emulator_serves_is_left_alone(tmp_path: Path) -> None:
    outlet = Pty(tmp_path / "bench")
    with pytest.raises(UsageError, match="exists already"):
        Pty(tmp_path / "bench")
    assert os.readlink(tmp_path / "bench") == outlet.name
    outlet.close()


def test_where_there_are_no_terminals_tcp_is_named(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.delattr(os, "openpty")
    with pytest.raises(UsageError) as caught:
        Pty(tmp_path / "bench")
    assert "--tcp" in caught.value.remedy


def test_a_host_name_that_is_none() -> None:
    with pytest.raises(UsageError, match="cannot be opened"):
        Tcp("no-such-host.invalid", 0)


def test_a_link_left_by_a_killed_server_is_replaced(tmp_path: Path) -> None:
    dead = tmp_path / "bench"
    dead.symlink_to("/dev/pts/no-such-terminal")
    outlet = Pty(dead)
    assert os.readlink(dead) == outlet.name
    outlet.close()
    assert not dead.is_symlink()
