"""A thin link over whatever pyserial can open, with a clock of its own.

An emulated box in this process lives in virtual time, and so does its link: `clock` and every timeout are virtual seconds. For
all others they are wall seconds times the box's own time scale (an emulator that runs ten times faster than life has ten
virtual seconds in one of ours), so that two seconds of silence mean the same everywhere.
"""

from __future__ import annotations

import contextlib
import time
from collections.abc import Callable
from typing import Any

import serial
from serial.tools import list_ports

from dwellbench.errors import DwellbenchError, LinkError, NoBoxError, UsageError
from dwellbench.wire.wire_log import WireLog

try:
    import termios

    _TERMIOS: tuple[type[BaseException], ...] = (termios.error,)
except ImportError:  # not on Windows
    _TERMIOS = ()

LINK_ERRORS: tuple[type[BaseException], ...] = (serial.SerialException, OSError, *_TERMIOS)
BAUD = 115200  # without meaning on USB; never 1200, which sends some boards into their bootloader
_MOST = 4096


class Link:
    """Bytes to and from one box. Raises LinkError when it breaks."""

    def __init__(self, url: str, port: Any, log: WireLog | None = None) -> None:
        self.url = url
        self.scale = 1.0
        self._port = port
        self._log = log
        self._clock: Callable[[], float] = getattr(port, "clock", None) or self._wall
        self._virtual = hasattr(port, "clock")

    def _wall(self) -> float:
        return time.monotonic() * self.scale

    def clock(self) -> float:
        """Seconds, on the link's own clock."""
        return self._clock()

    def write(self, data: bytes) -> None:
        """Send bytes."""
        try:
            self._port.write(data)
        except LINK_ERRORS as error:
            raise _broke(self.url, error) from None
        if self._log is not None:
            self._log.sent(self.clock(), data)

    def read(self, timeout_s: float) -> bytes:
        """Return what comes within `timeout_s` of the link's clock: at once when something is there, b"" when nothing came."""
        try:
            wait = timeout_s if self._virtual else timeout_s / self.scale
            if self._port.timeout != wait:
                self._port.timeout = wait
            data: bytes = self._port.read(1)
        except LINK_ERRORS as error:
            raise _broke(self.url, error) from None
        if data:
            data += self._more()
        if data and self._log is not None:
            self._log.received(self.clock(), data)
        return data

    def _more(self) -> bytes:
        """What has come behind the first byte. A link that breaks here is told by the next read: what came before it is not lost."""
        with contextlib.suppress(*LINK_ERRORS):
            waiting = self._port.in_waiting
            if waiting:
                more: bytes = self._port.read(min(waiting, _MOST))
                return more
        return b""

    def close(self) -> None:
        """Close the port; a port that is gone already is no error."""
        beneath = getattr(
            self._port, "_socket", None
        )  # pyserial leaves it open when the other side has gone first
        with contextlib.suppress(*LINK_ERRORS):
            self._port.close()
        if beneath is not None:
            beneath.close()


def open_link(url: str, log: WireLog | None = None) -> Link:
    """Open a port or any pyserial URL. NoBoxError says why it cannot be."""
    try:
        port = serial.serial_for_url(url, baudrate=BAUD, timeout=0.1, do_not_open=True)
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
    return Link(url, port, log)


_SAY_WHICH = "List the ports with: dwellbench box --list. Without a box, try --box emu://film."


def _not_opened(url: str, error: BaseException) -> NoBoxError:
    text = str(error)
    number = getattr(error, "errno", None)
    if number == 13 or "Permission" in text:
        return NoBoxError(
            f"You may not open {url}.",
            remedy="Join the group that owns the port (often dialout), then log in again.",
        )
    if number == 11 or "Resource temporarily unavailable" in text or "busy" in text.lower():
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
