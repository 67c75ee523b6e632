"""The latched reason, and the marker of a run under way. Both survive what the controller does not.

A reason is held in RAM at once and in scratch that survives a reset; it is written to flash only when discharge has been
proven, because a flash page takes tens of milliseconds and the loop may not pause while it guards. The marker is written
before a run (at rest, discharge proven) and cleared at clean rest, so a reset in between is a reason of its own.
"""

from .codes import FAULT_NONE, FAULT_RESET_IN_RUN, FAULTS
from .compat import const

_MISSING = const(128)  # in scratch beside the reason: charge not accounted for
_MARK = b"1"
_CLEAR = b"0"


class Latch:
    """`reason` is a fault's code, FAULT_NONE when there is none. `missing`: charge is not accounted for."""

    def __init__(self, board):
        """Take up what an earlier life left behind."""
        self._board = board
        self.reason = FAULT_NONE
        self.missing = False
        self._written = True
        self._marked = board.kept("marker") == _MARK
        kept = board.kept("latch")
        value = board.scratch() & 255
        if not value and kept:
            value = kept[0]
        reason = value & 127
        if 0 < reason < len(FAULTS):
            self.reason = reason
            self.missing = bool(value & _MISSING)
        elif reason or self._marked:
            self.reason = FAULT_RESET_IN_RUN
            self.missing = True  # nobody saw what became of the charge
        self._written = bool(kept) and kept[0] == self._value()
        self._remember()

    def _value(self):
        return self.reason | (_MISSING if self.missing else 0)

    def _remember(self):
        self._board.set_scratch(self._value())

    def take(self, reason):
        """Latch a reason; the first one stays."""
        if self.reason == FAULT_NONE:
            self.reason = reason
        self._written = False
        self._remember()

    def keep_first(self, reason):
        """Latch a reason only if there is none."""
        if self.reason == FAULT_NONE:
            self.take(reason)

    def charge_missing(self):
        """Latch that charge is not accounted for."""
        self.missing = True
        self._written = False
        self._remember()

    def settle(self):
        """Write to flash what is not there yet. Only with discharge proven: this pauses the loop. Say whether it did."""
        if self._written:
            return False
        self._written = True
        self._board.keep("latch", bytes((self._value(),)))
        return True

    def mark(self):
        """Mark that a run is under way. Pauses the loop: only at rest."""
        self._marked = True
        self._board.keep("marker", _MARK)

    def unmark(self):
        """Clear the marker, at clean rest. Say whether the loop was paused."""
        if not self._marked:
            return False
        self._marked = False
        self._board.keep("marker", _CLEAR)
        return True

    def acknowledge(self):
        """Forget the reason. Pauses the loop."""
        self.reason = FAULT_NONE
        self.missing = False
        self._remember()
        self._written = True
        self._board.keep("latch", b"\x00")
        self.unmark()
