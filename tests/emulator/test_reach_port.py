"""Reaching an emulated box: the `emu://` port, its buffers, and the servers for other processes."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import serial

import dwellbench  # noqa: F401  (makes emu:// known)
from dwellbench.emulator.handlers.protocol_emu import ENDLESS_S
from dwellbench.emulator.link_fifo import HOST_BYTES, IN_BYTES, OUT_BYTES, LinkFifo
from dwellbench.emulator.opening import Opening
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


# ---- URLs


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


# ---- the traps of ports


def test_every_setting_of_a_port_is_taken(tmp_path: Path) -> None:
    settings: dict[str, Any] = {
        "baudrate": 12345,
        "bytesize": 7,
        "parity": "E",
        "stopbits": 2,
        "xonxoff": True,
    }
    settings |= {"rtscts": True, "dsrdtr": True, "exclusive": True, "inter_byte_timeout": 0.1}
    with serial.serial_for_url("emu://film?seed=3", timeout=1, write_timeout=1, **settings) as one:
        one.write(bytearray(HELLO))
        assert one.readline().endswith(b"}\n")
        one.timeout = 2
        one.send_break(0)
        assert "emu://film" in repr(one)
    with pytest.raises(UsageError, match="1200"):
        serial.serial_for_url("emu://film", baudrate=1200)


def test_a_write_that_nobody_takes_waits_and_times_out_in_virtual_time(port: Any) -> None:
    port.box.to_plain()
    port.write_timeout = 1
    begin = port.clock()
    assert port.write(b"x" * (IN_BYTES + HOST_BYTES)) == IN_BYTES + HOST_BYTES
    assert port.clock() == begin
    with pytest.raises(serial.SerialTimeoutException):
        port.write(b"x")
    assert port.clock() - begin == pytest.approx(1.0, abs=0.006)
    port.flush()
    assert port.clock() - begin == pytest.approx(2.0, abs=0.011)
    port.reset_output_buffer()
    assert port.out_waiting == IN_BYTES


@pytest.mark.parametrize("ending", ["close", "cancel_read"])
@pytest.mark.parametrize("call", ["read", "read_until"])
def test_a_read_ends_early_when_another_thread_says_so(port: Any, ending: str, call: str) -> None:
    tick, count = port.box.tick, iter(range(1000))

    def ended() -> None:
        tick()
        if next(count) == 5:
            getattr(port, ending)()

    port.box.tick = ended
    box, begin = port.box, port.box.now_s
    assert getattr(port, call)(*((1000,) if call == "read" else ())) == b""
    assert box.now_s - begin < 0.2
    assert next(count) == 6


def test_a_port_without_a_name_and_one_opened_twice(port: Any) -> None:
    with pytest.raises(serial.SerialException, match="already open"):
        port.open()
    with pytest.raises(serial.SerialException, match="configured"):
        type(port)().open()
    with pytest.raises(UsageError, match="not an emu"):
        port.from_url("nonsense")
