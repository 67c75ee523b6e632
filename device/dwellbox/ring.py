"""The numbered ring: every sample, state, fault, end and log line, in one count since boot, kept for at least two minutes.

A host that lost the link asks again from a number. The last run's events stay until the next run writes over them. Samples are
packed into a buffer made once, so that keeping one allocates nothing; the rare others keep their words in a bounded table.
"""

import struct

from .compat import const

SAMPLE = const(0)
STATE = const(1)
FAULT = const(2)
DONE = const(3)
LOG = const(4)

# kind | vrange << 3 | stage << 4, shunt | range << 2 | flags << 4, t, sv, si, vmin, vmax, imin, imax, vs, temp,
# nv | ni << 5 | iclip << 10: a window has at most 20 readings, and two minutes of rows are the largest thing on the heap
_FORM = "<BBIiihhhhhhH"
_SIZE = struct.calcsize(_FORM)
_KIND = const(7)
_COUNT = const(31)
_CHUNK = const(64)  # rows a piece: the heap need not have 40 kB in one place
_NOTES = const(120)  # events that are not samples: a run makes about a dozen


class Ring:
    """`n` is the number the next event gets; `first` the oldest still kept."""

    def __init__(self, capacity):
        """Make room for at least `capacity` events. Keeping a sample allocates nothing afterwards."""
        pieces = (capacity + _CHUNK - 1) // _CHUNK
        self.capacity = pieces * _CHUNK
        self.n = 0
        self.first = 0
        self._pieces = [bytearray(_CHUNK * _SIZE) for _ in range(pieces)]
        self._notes = {}

    def _turn(self):
        """Count the next event and return its number."""
        n = self.n
        self.n = n + 1
        if n + 1 - self.first > self.capacity:
            self.first = n + 1 - self.capacity
        return n

    def _piece(self, n):
        return self._pieces[n % self.capacity // _CHUNK]

    def sample(
        self, t, stage, shunt, range_, nv, sv, vmin, vmax, ni, si, imin, imax, iclip, vs, temp, flags, vrange
    ):
        """Keep one window; its counts are at most 31 each. Allocates nothing."""
        n = self._turn()
        rows = self._pieces[n % self.capacity // _CHUNK]
        at = n % _CHUNK * _SIZE
        first = SAMPLE | vrange << 3 | stage << 4
        second = shunt | range_ << 2 | flags << 4
        counts = nv | ni << 5 | iclip << 10
        struct.pack_into(_FORM, rows, at, first, second, t, sv, si, vmin, vmax, imin, imax, vs, temp, counts)

    def state(self, t, state, stage, why):
        """Keep a move. Allocates."""
        self._note(STATE, t, (state, stage, why))

    def fault(self, t, fault, state, value):
        """Keep a fault. Allocates."""
        self._note(FAULT, t, (fault, state, value))

    def done(self, t, run, run_key, end, fault, extra):
        """Keep the end of a run; `extra` is a list of (name, value). Allocates."""
        self._note(DONE, t, (run, run_key, end, fault, extra))

    def log(self, t, text):
        """Keep a line for people. Allocates."""
        self._note(LOG, t, (text,))

    def _note(self, kind, t, words):
        n = self._turn()
        self._piece(n)[n % _CHUNK * _SIZE] = kind
        notes = self._notes
        if len(notes) >= _NOTES:
            del notes[min(notes)]
        notes[n] = (t, words)

    def kind(self, n):
        """Return the kind of a kept event."""
        return self._piece(n)[n % _CHUNK * _SIZE] & _KIND

    def note(self, n):
        """Return (t, words) of an event that is not a sample, or None when its words are gone."""
        return self._notes.get(n)

    def row(self, n, into):
        """Unpack a sample's numbers after its `n` into the list `into` (17 places). Allocates nothing that stays."""
        rows = self._piece(n)
        at = n % _CHUNK * _SIZE
        first = rows[at]
        second = rows[at + 1]
        counts = _word(rows, at + 26)
        into[0] = _word(rows, at + 2) | _word(rows, at + 4) << 16
        into[1] = first >> 4
        into[2] = second & 3
        into[3] = second >> 2 & 1
        into[4] = counts & _COUNT
        into[5] = _long(rows, at + 6)
        into[6] = _short(rows, at + 14)
        into[7] = _short(rows, at + 16)
        into[8] = counts >> 5 & _COUNT
        into[9] = _long(rows, at + 10)
        into[10] = _short(rows, at + 18)
        into[11] = _short(rows, at + 20)
        into[12] = counts >> 10
        into[13] = _short(rows, at + 22)
        into[14] = _short(rows, at + 24)
        into[15] = second >> 4
        into[16] = first >> 3 & 1


def _word(buffer, at):
    return buffer[at] | buffer[at + 1] << 8


def _short(buffer, at):
    value = buffer[at] | buffer[at + 1] << 8
    return value - 65536 if value & 0x8000 else value


def _long(buffer, at):
    """Return a signed 32-bit number that is known to fit 30 bits."""
    high = _short(buffer, at + 2)
    return (high << 16) + _word(buffer, at)
