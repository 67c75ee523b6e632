"""The events of one box in order, ready to be taken, and the asking for those that are missing.

Without I/O: it says what to ask for and is told what was asked and answered; whoever holds the link does the rest.
"""

from __future__ import annotations

from collections import deque

from dwellbench.wire.core import Answer, Notice, Refusal
from dwellbench.wire.stream import Stream

AGAIN_S = 1.0  # after this without a missing event it is asked for again; the box sends ten and more a second
FETCHES = 5  # answered so often, an event that still did not come whole never will


class Inbox:
    """`ready` holds the events in order that nobody has taken yet."""

    def __init__(self) -> None:
        self.ready: deque[Notice] = deque()
        self._stream = Stream(0)
        self._asked: int | None = None  # the id of the request that is under way
        self._answered = False
        self._again_s = 0.0
        self._gap = -1  # the first that was missing when we looked last
        self._page_end = 0
        self._fruitless = 0

    def begin_at(self, n: int) -> None:
        """Forget all that came, and go on with the event `n`."""
        self.ready.clear()
        self._stream = Stream(n)
        self._asked = None

    def skip_to(self, n: int) -> None:
        """What came before the event `n` is of no use, taken or not; nor is it lost."""
        kept = [notice for notice in self.ready if notice.n >= n]
        kept += self._stream.oldest_is(n)
        self.ready = deque(kept)
        self._stream.lost = 0

    @property
    def next_n(self) -> int:
        """The event that comes next."""
        return self._stream.next_n

    @property
    def lost(self) -> int:
        """Events that the box no longer kept when they were asked for, or that never came whole."""
        return self._stream.lost

    def take(self, notice: Notice) -> None:
        """An event came, in whatever order."""
        self.ready.extend(self._stream.take(notice))

    def expect(self, n: int) -> None:
        """The box says that its next event will be `n`."""
        self._stream.expect(n)

    def due(self, now_s: float) -> tuple[int, int] | None:
        """Return (from, count) when something is missing and it is time to ask for it."""
        gap = self._stream.missing()
        if gap is None:
            self._asked = None
            return None
        if gap[0] != self._gap:
            self._gap, self._fruitless = gap[0], 0
            self._again_s = now_s + AGAIN_S  # they come
        if self._asked is None or gap[0] >= self._page_end:
            return gap
        if now_s < self._again_s:
            return None
        self._judge(gap[0])
        return self._stream.missing()

    def _judge(self, first: int) -> None:
        """Count the fetches that brought nothing. One event that is never as the schema has it is lost; the rest is not."""
        self._fruitless += self._answered
        if self._fruitless >= FETCHES:
            self.ready.extend(self._stream.oldest_is(first + 1))

    def asked(self, id_: int, page: tuple[int, int], now_s: float) -> None:
        """The `page` that `due` returned has been asked for."""
        self._asked, self._answered = id_, False
        self._page_end = sum(page)
        self._again_s = now_s + AGAIN_S

    def answer(self, event: Answer | Refusal, now_s: float) -> bool:
        """Take the answer to what was asked; return whether it is that."""
        if self._asked is None or event.id != self._asked:
            return False
        self._again_s = now_s + AGAIN_S
        if isinstance(event, Answer):
            self._answered = True
            self.ready.extend(self._stream.oldest_is(event.result["from"]))
        return True

    def cut(self) -> None:
        """The link was lost, and with it what was under way."""
        self._asked = None
