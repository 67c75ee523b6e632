"""Links that cannot be opened, and how one reads and waits."""

from __future__ import annotations

import os
import socket

import pytest
import serial

from dwellbench.errors import LinkError, NoBoxError
from dwellbench.wire.link import open_link


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


def test_what_came_before_a_link_broke_is_not_lost() -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        link = open_link(f"socket://127.0.0.1:{listener.getsockname()[1]}")
        peer, _ = listener.accept()
        peer.sendall(b"last words")
        peer.close()
        heard = b""
        with pytest.raises(LinkError):
            for _ in range(20):
                heard += link.read(1.0)
        assert heard == b"last words"
        link.close()


def test_a_peer_that_takes_nothing_does_not_hold_a_write_for_ever(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("dwellbench.wire.link.WRITE_S", 0.1)
    master, slave = os.openpty()
    try:
        link = open_link(os.ttyname(slave))
        with pytest.raises(LinkError):
            for _ in range(10):
                link.write(b"x" * 4096)
        link.close()
    finally:
        os.close(master)
        os.close(slave)
