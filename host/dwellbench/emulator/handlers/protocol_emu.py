"""pyserial's `emu://`: an emulated box in this process, in virtual time and without threads.

Time passes only while the host waits here, one control period at a time, until what was asked for is there or the timeout is over
in virtual seconds. `clock()` is the link's own clock, `wait()` lets time pass without reading. Even a call that may not wait lets
one period pass when nothing is there, or a host that polls would stand still. A read without a timeout is bounded, for a box that
never says anything would otherwise hold the host for ever.
"""

from __future__ import annotations

import sys
from typing import Any

from serial.serialutil import PortNotOpenError, SerialBase, SerialException, SerialTimeoutException

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.opening import Opening
from dwellbench.errors import UsageError

# Longer than anything the box does without saying a word (the longest charge of its largest part is 20 minutes).
ENDLESS_S = 3600.0
_BOOTLOADER_BAUD = 1200


class Serial(SerialBase):
    """Behaves as a serial port does; what a test may look behind is `box`."""

    box: EmulatedBox
    _opening: Opening
    _timeout: float | None  # of the base; its type stubs leave these out
    _write_timeout: float | None
    _baudrate: int
    _cancelled = False

    def open(self) -> None:
        """Switch the emulated box on. SerialException if it is open already, DwellbenchError for a box that cannot be."""
        url = self.port
        if url is None:
            raise SerialException("Port must be configured before it can be used.")
        if self.is_open:
            raise SerialException("Port is already open.")
        self._reconfigure_port()
        self._opening = Opening.from_url(url)
        self.box = self._opening.make()
        self.box.link.attach(True)
        self._cancelled = False
        self.is_open = True

    def close(self) -> None:
        """Keep its state, if it has a file, and switch it off."""
        if not self.is_open:
            return
        self.is_open = False
        try:
            self._opening.leave(self.box)
        finally:
            self.box.stop()

    def from_url(self, url: str) -> None:
        """Check a URL early."""
        Opening.from_url(url)

    # -- time

    def clock(self) -> float:
        """Virtual seconds since the box was switched on first."""
        return self.box.now_s

    def wait(self, seconds: float) -> None:
        """Let virtual time pass."""
        self._need()
        self._pass_until(self._deadline(seconds))

    def _deadline(self, seconds: float | None) -> int:
        return self.box.world.now_us + round((ENDLESS_S if seconds is None else seconds) * 1e6)

    def _pass_until(self, until_us: int) -> None:
        while self.box.world.now_us < until_us and self.is_open:
            self.box.tick()

    def _need(self) -> None:
        if not self.is_open:
            raise PortNotOpenError

    # -- bytes

    def read(self, size: int = 1) -> bytes:
        """Return up to `size` bytes, waiting in virtual time; fewer when the time is over, or another thread cancels or closes."""
        self._need()
        box = self.box
        until_us = self._deadline(self._timeout)
        self._cancelled = False
        taken = bytearray(box.link.pull(size))
        while len(taken) < size and not self._cancelled:
            box.tick()
            if not self.is_open:
                break
            taken += box.link.pull(size - len(taken))
            if box.world.now_us >= until_us:
                break
        return bytes(taken)

    def read_until(self, expected: bytes = b"\n", size: int | None = None) -> bytes:
        """The base's, without a call for every byte when `expected` is one byte, as a newline is."""
        if len(expected) != 1:
            return bytes(super().read_until(expected, size))
        self._need()
        box, most = self.box, sys.maxsize if size is None else size
        until_us = self._deadline(self._timeout)
        self._cancelled = False
        taken, ticked = bytearray(), False
        while True:
            taken += box.link.pull(min(box.link.out.find(expected) + 1 or most, most - len(taken)))
            if taken.endswith(expected) or len(taken) >= most or self._cancelled or not self.is_open:
                return bytes(taken)
            if box.world.now_us >= until_us and ticked:
                return bytes(taken)
            box.tick()
            ticked = True

    def write(self, data: Any) -> int:
        """Hand bytes to the box. Time passes only when they are more than a driver would hold; SerialTimeoutException when too much."""
        self._need()
        sent = bytes(data)
        until_us = self._deadline(self._write_timeout)
        link, at = self.box.link, 0
        while at < len(sent):
            room = link.host_room()
            if room > 0:
                link.push(sent[at : at + room])
                at += room
            elif self.box.world.now_us >= until_us or not self.is_open:
                raise SerialTimeoutException("Write timeout")
            else:
                self.box.tick()
        return len(sent)

    @property
    def in_waiting(self) -> int:
        """How many bytes may be read at once. Lets one period pass when there are none."""
        self._need()
        if not self.box.link.out:
            self.box.tick()
        return len(self.box.link.out)

    @property
    def out_waiting(self) -> int:
        """How many bytes the box has not taken yet."""
        self._need()
        return len(self.box.link.waiting) + len(self.box.link.into)

    def cancel_read(self) -> None:
        """End a read that waits."""
        self._cancelled = True

    def cancel_write(self) -> None:
        """A write waits only while the box does not read, and no longer than its timeout."""

    def flush(self) -> None:
        """Wait until the box has all that was written, as draining a port does, but not for ever."""
        self._need()
        until_us = self._deadline(self._write_timeout)
        while self.box.link.waiting and self.box.world.now_us < until_us:
            self.box.tick()

    def reset_input_buffer(self) -> None:
        """Drop what has come and was not read."""
        self._need()
        self.box.link.pull()

    def reset_output_buffer(self) -> None:
        """Drop what the box has not taken."""
        self._need()
        self.box.link.waiting.clear()

    # -- what a port has and this one has no use for

    def _reconfigure_port(self, force_update: bool = False) -> None:
        if self._baudrate == _BOOTLOADER_BAUD:
            raise UsageError("1200 baud would send a board into its bootloader.", remedy="Use another speed.")

    def _update_break_state(self) -> None:
        """No break on this line."""

    def _update_rts_state(self) -> None:
        """No handshake."""

    def _update_dtr_state(self) -> None:
        """A port that is open has a host."""

    @property
    def cts(self) -> bool:
        """Clear to send, always."""
        return True

    @property
    def dsr(self) -> bool:
        """The box is there."""
        return True

    @property
    def ri(self) -> bool:
        """Nobody rings."""
        return False

    @property
    def cd(self) -> bool:
        """The box is there."""
        return True
