"""The numbered ring: every sample, state, fault, end and log line, in one count since boot, kept for at least two minutes.

A host that lost the link asks again from a number. The last run's events stay until the next run writes over them. Samples are
packed into a buffer made once, so that keeping one allocates nothing; the rare others keep their words in a bounded table.
"""

import struct

from .compat import const, put_row
from .row import FORM, SIZE

SAMPLE = const(0)
STATE = const(1)
FAULT = const(2)
DONE = const(3)
LOG = const(4)

_KIND = const(7)
_CHUNK = const(64)  # rows a piece: the heap need not have 40 kB in one place
_NOTES = const(120)  # events that are not samples: a run makes about a dozen
_LETTERS = const(120)  # of a log line


class Ring:
    """`n` is the number the next event gets; `first` the oldest still kept."""

    def __init__(self, capacity):
        """Make room for at least `capacity` events. Keeping a sample allocates nothing afterwards."""
        pieces = (capacity + _CHUNK - 1) // _CHUNK
        self.capacity = pieces * _CHUNK
        self.n = 0
        self.first = 0
        self._pieces = [bytearray(_CHUNK * SIZE) for _ in range(pieces)]
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
        at = n % _CHUNK * SIZE
        first = SAMPLE | vrange << 3 | stage << 4
        second = shunt | range_ << 2 | flags << 4
        counts = nv | ni << 5 | iclip << 10
        struct.pack_into(FORM, rows, at, first, second, t, sv, si, vmin, vmax, imin, imax, vs, temp, counts)

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
        """Keep a line for people, its first 120 letters. Allocates."""
        self._note(LOG, t, (text[:_LETTERS],))

    def _note(self, kind, t, words):
        n = self._turn()
        self._piece(n)[n % _CHUNK * SIZE] = kind
        notes = self._notes
        if len(notes) >= _NOTES:
            del notes[min(notes)]
        notes[n] = (t, words)

    def kind(self, n):
        """Return the kind of a kept event."""
        return self._piece(n)[n % _CHUNK * SIZE] & _KIND

    def note(self, n):
        """Return (t, words) of an event that is not a sample, or None when its words are gone."""
        return self._notes.get(n)

    def put_row(self, n, buffer, at):
        """Write a sample's seventeen numbers into `buffer` at `at`, a comma before each; return where they end.

        Allocates nothing.
        """
        return put_row(self._piece(n), n % _CHUNK * SIZE, buffer, at)
