"""Links that cannot be opened, and the log of what passed."""

from __future__ import annotations

import os
import socket
from pathlib import Path

import pytest
import serial

from dwellbench.errors import NoBoxError, UsageError
from dwellbench.wire.link import open_link
from dwellbench.wire.wire_log import WireLog, read_log


def test_a_refused_port_says_that_nothing_listens() -> None:
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    with pytest.raises(NoBoxError, match="Nothing listens"):
        open_link(f"socket://127.0.0.1:{port}")


def test_a_port_in_use_says_so() -> None:
    master, slave = os.openpty()
    try:
        link = open_link(os.ttyname(slave))
        with pytest.raises(NoBoxError, match="in use"):
            open_link(os.ttyname(slave))
        link.close()
    finally:
        os.close(master)
        os.close(slave)


def test_a_port_without_permission_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    """The error as pyserial raises it; a test that runs as root cannot provoke the real one."""

    def denied(*arguments: object, **options: object) -> None:
        raise serial.SerialException(
            13, "could not open port /dev/ttyACM0: [Errno 13] Permission denied: '/dev/ttyACM0'"
        )

    monkeypatch.setattr(serial, "serial_for_url", denied)
    with pytest.raises(NoBoxError, match="may not open") as caught:
        open_link("/dev/ttyACM0")
    assert "group" in caught.value.remedy


def test_the_log_is_read_back_line_by_line(tmp_path: Path) -> None:
    log = WireLog(tmp_path / "log")
    log.sent(1.0, b'{"a":1}\n{"b"')
    log.received(1.5, b"junk \xff\n")
    log.sent(2.0, b":2}\n")
    log.received(3.0, b"half")
    log.close()
    assert read_log(tmp_path / "log") == [
        (1.0, ">", b'{"a":1}\n'),
        (1.5, "<", b"junk \\xff\n"),
        (2.0, ">", b'{"b":2}\n'),
    ]
    assert "# unfinished < half" in (tmp_path / "log").read_text()


def test_a_log_that_cannot_be_written_says_so(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="cannot be written"):
        WireLog(tmp_path / "no" / "such" / "folder")
