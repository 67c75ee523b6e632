"""A thin link over whatever pyserial can open, with a clock of its own (see `clock.py`)."""

from __future__ import annotations

import contextlib
import errno
import select
import socket
import sys
from typing import Any

import serial
from serial.tools import list_ports

from dwellbench.errors import DwellbenchError, LinkError, NoBoxError, UsageError
from dwellbench.wire.clock import Clock, PortClock, WallClock
from dwellbench.wire.held import held
from dwellbench.wire.wire_log import WireLog

try:
    import termios

    _TERMIOS: tuple[type[BaseException], ...] = (termios.error,)
except ImportError:  # not on Windows
    _TERMIOS = ()

LINK_ERRORS: tuple[type[BaseException], ...] = (serial.SerialException, OSError, *_TERMIOS)
BAUD = 115200  # without meaning on USB; never 1200, which sends some boards into their bootloader
WRITE_S = 1.0  # a line is gone in milliseconds; a peer that takes none for this long has hung
_MOST = 4096


class Link:
    """Bytes to and from one box. Raises LinkError when it breaks.

    `clock` is the port's own where it has one (emu://), else the one given or a new WallClock.
    """

    def __init__(self, url: str, port: Any, log: WireLog | None = None, clock: Clock | None = None) -> None:
        self.url = url
        self._port = port
        self._log = log
        self._socket: socket.socket | None = getattr(port, "_socket", None)
        self.clock: Clock = PortClock(port) if hasattr(port, "clock") else clock or WallClock()
        # An emulated box runs inside our reads and writes; torn apart in mid-step it could not be stopped in order.
        self._whole = held if self.clock.virtual else contextlib.nullcontext

    def write(self, data: bytes) -> None:
        """Send bytes."""
        try:
            with self._whole():
                self._port.write(data)
        except LINK_ERRORS as error:
            raise _broke(self.url, error) from None
        if self._log is not None:
            self._log.sent(self.clock.now(), data)

    def read(self, timeout_s: float) -> bytes:
        """Return what comes within `timeout_s` of the link's clock: at once when something is there, b"" when nothing came."""
        try:
            with self._whole():
                data = self._read(self.clock.port_timeout(timeout_s))
        except LINK_ERRORS as error:
            raise _broke(self.url, error) from None
        if data and self._log is not None:
            self._log.received(self.clock.now(), data)
        return data

    def _read(self, timeout_s: float) -> bytes:
        if self._port.timeout != timeout_s:
            self._port.timeout = timeout_s
        if self.clock.virtual:  # its bytes come as we wait for them: a whole line is worth one call
            line: bytes = self._port.read_until(b"\n", _MOST)
            return line
        data: bytes = self._port.read(1)
        return data + self._more() if data else data

    def _more(self) -> bytes:
        """What has come behind the first byte. A link that breaks here is told by the next read: what came before it is not lost."""
        with contextlib.suppress(*LINK_ERRORS):
            if self._socket is not None:  # of which pyserial says no more than that one byte is waiting
                ready, _, _ = select.select([self._socket], [], [], 0.0)
                return self._socket.recv(_MOST) if ready else b""
            waiting = self._port.in_waiting
            if waiting:
                more: bytes = self._port.read(min(waiting, _MOST))
                return more
        return b""

    def pause(self, seconds: float) -> None:
        """Let time pass on the link's clock, without reading."""
        try:
            with self._whole():
                self.clock.pause(seconds)
        except LINK_ERRORS as error:
            raise _broke(self.url, error) from None

    def close(self) -> None:
        """Close the port; a port that is gone already is no error."""
        with contextlib.suppress(*LINK_ERRORS), self._whole():
            self._port.close()
        if self._socket is not None:  # which pyserial leaves open when the other side has gone first
            self._socket.close()


def open_link(url: str, log: WireLog | None = None, clock: Clock | None = None) -> Link:
    """Open a port or any pyserial URL. NoBoxError says why it cannot be. `clock` goes on where an earlier link's stopped."""
    try:
        port = serial.serial_for_url(url, baudrate=BAUD, timeout=0.1, write_timeout=WRITE_S, do_not_open=True)
        if "://" not in url:
            port.exclusive = True
        port.open()
    except DwellbenchError:
        raise
    except ValueError as error:
        raise UsageError(
            f"{url} is not a port or URL that can be opened ({error}).", remedy=_SAY_WHICH
        ) from None
    except LINK_ERRORS as error:
        raise _not_opened(url, error) from None
    return Link(url, port, log, clock)


_SAY_WHICH = "List the ports with: dwellbench box --list. Without a box, try --box emu://film."


def _not_opened(url: str, error: BaseException) -> NoBoxError:
    text = str(error)
    number = getattr(error, "errno", None)
    if (
        sys.platform == "win32" and "Access is denied" in text
    ):  # there it means that another program has it open
        number = errno.EAGAIN
    elif number == errno.EACCES or "Permission" in text:
        return NoBoxError(
            f"You may not open {url}.",
            remedy="Join the group that owns the port (often dialout), then log in again.",
        )
    if number == errno.EAGAIN or "Resource temporarily unavailable" in text or "busy" in text.lower():
        return NoBoxError(
            f"{url} is in use by another program.",
            remedy="Close the other program; one host drives a box at a time.",
        )
    if "refused" in text:
        return NoBoxError(f"Nothing listens at {url}.", remedy="Start the box or emulator there first.")
    return NoBoxError(f"There is nothing to open at {url}.", remedy=_SAY_WHICH)


def _broke(url: str, error: BaseException) -> LinkError:
    return LinkError(
        f"The link to {url} broke ({error}).",
        remedy="Check the cable. The box discharges the part by itself.",
    )


def ports() -> list[dict[str, str]]:
    """Serial ports of this computer: name, what it says it is."""
    return [{"url": port.device, "what": port.description or ""} for port in list_ports.comports()]
