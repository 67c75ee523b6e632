"""pyserial's `emu://`: an emulated box in this process, in virtual time and without threads.

Time passes only while the host reads (or asks what is waiting), one control period at a time, until what was asked for is there
or the timeout is over in virtual seconds. `clock()` is the link's own clock. A read without a timeout is bounded, for a box that
never says anything would otherwise hold the host for ever.
"""

from __future__ import annotations

from typing import Any

from serial.serialutil import PortNotOpenError, SerialBase, SerialException

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.opening import Opening
from dwellbench.errors import UsageError

# Longer than anything the box does without saying a word (the longest charge of its largest part is 20 minutes).
ENDLESS_S = 3600.0


class Serial(SerialBase):
    """Behaves as a serial port does; what a test may look behind is `box`."""

    box: EmulatedBox
    _open_as: Opening
    # set by the base class, which the published stubs do not say
    _port: str | None
    _timeout: float | None
    _baudrate: int

    def open(self) -> None:
        """Switch the emulated box on. SerialException if it is open already."""
        if self._port is None:
            raise SerialException("Port must be configured before it can be used.")
        if self.is_open:
            raise SerialException("Port is already open.")
        self._open_as = Opening.from_url(self._port)
        self.box = self._open_as.make()
        self.box.link.attach(True)
        self._cancelled = False
        self.is_open = True

    def close(self) -> None:
        """Keep its state, if it has a file, and switch it off."""
        if not self.is_open:
            return
        self.is_open = False
        self.box.link.attach(False)
        try:
            self._open_as.leave(self.box)
        finally:
            self.box.stop()

    def from_url(self, url: str) -> None:
        """Check a URL early."""
        Opening.from_url(url)

    # -- time

    def clock(self) -> float:
        """Virtual seconds."""
        return self.box.now_s

    def wait(self, seconds: float) -> None:
        """Let virtual time pass."""
        self._need()
        until = self.box.now_s + seconds
        while self.box.now_s < until:
            self.box.tick()

    def _need(self) -> None:
        if not self.is_open:
            raise PortNotOpenError

    # -- bytes

    def read(self, size: int = 1) -> bytes:
        """Return up to `size` bytes, waiting in virtual time."""
        self._need()
        box, out = self.box, self.box.link.out
        limit = ENDLESS_S if self._timeout is None else self._timeout
        until_us = box.world.now_us + round(limit * 1e6)
        self._cancelled = False
        taken = bytearray(box.link.pull(size))
        first = True
        while len(taken) < size and (first or box.world.now_us < until_us) and not self._cancelled:
            first = False  # even a read that may not wait lets one period pass, or a polling host would stand still
            box.tick()
            self._need()
            if out:
                taken += box.link.pull(size - len(taken))
        return bytes(taken)

    def write(self, data: Any) -> int:
        """Hand bytes to the box; time does not pass."""
        self._need()
        sent = bytes(data)
        self.box.link.push(sent)
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
        """Nothing ever waits in a write."""

    def flush(self) -> None:
        """Nothing is held back."""
        self._need()

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
        if self._baudrate == 1200:
            raise UsageError("1200 baud would send a board into its bootloader.", remedy="Use another speed.")

    def _update_break_state(self) -> None:
        """No break on this line."""

    def _update_rts_state(self) -> None:
        """No handshake."""

    def _update_dtr_state(self) -> None:
        """A port that is open has a host."""

    @property
    def cts(self) -> bool:
        return True

    @property
    def dsr(self) -> bool:
        return True

    @property
    def ri(self) -> bool:
        return False

    @property
    def cd(self) -> bool:
        return True
