"""The numbered events put in order: each once, none missing, whatever the link did.

The box counts its events from its start. What comes twice is dropped; what comes early is held until the gap before it is
filled, which the box does when asked (`samples` from a number). What the box no longer keeps is counted as lost, and said.
"""

from __future__ import annotations

from dwellbench.wire.core import Notice

ASK_MOST = 64  # what the box sends again within a second or so, beside what it sends anyway


class Stream:
    """Feed it notices; it gives them back in order."""

    def __init__(self, next_n: int) -> None:
        self.next_n = next_n
        self.lost = 0
        self._early: dict[int, Notice] = {}
        self._until = next_n  # the box has counted so far: events below it exist

    def take(self, notice: Notice) -> list[Notice]:
        """Return the notices that are now in order, this one perhaps among them."""
        for one in _single(notice):
            if one.n >= self.next_n:
                self._early[one.n] = one
        return self._ready()

    def _ready(self) -> list[Notice]:
        ready = []
        while self.next_n in self._early:
            ready.append(self._early.pop(self.next_n))
            self.next_n += 1
        return ready

    def missing(self) -> tuple[int, int] | None:
        """Return (from, count) of the first gap, or None."""
        stop = min(self._early) if self._early else self._until
        if stop <= self.next_n:
            return None
        return self.next_n, min(stop - self.next_n, ASK_MOST)

    def expect(self, n: int) -> None:
        """The box says that its next event will be `n`: all before it exist, and are asked for if they do not come."""
        self._until = max(self._until, n)

    def oldest_is(self, n: int) -> list[Notice]:
        """The box keeps nothing before `n`: go on from there. Returns what is in order then."""
        if n > self.next_n:
            self.lost += n - self.next_n - sum(1 for early in self._early if early < n)
            for early in [early for early in self._early if early < n]:
                del self._early[early]
            self.next_n = n
        return self._ready()


def _single(notice: Notice) -> list[Notice]:
    """A samples message with several rows is as many events."""
    if notice.method != "samples" or len(notice.params["rows"]) == 1:
        return [notice]
    boot = notice.params["boot"]
    return [Notice("samples", {"n": row[0], "boot": boot, "rows": [row]}) for row in notice.params["rows"]]
