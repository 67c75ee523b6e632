"""A wire on a bench: a board's clock and a link with a given room, which enforces the seam's rules; a handler that remembers."""

from __future__ import annotations

import json
from collections import deque
from typing import Any

from dwellbox.encode import LINE
from dwellbox.ring import Ring
from dwellbox.wire import Wire


class LinkBoard:
    """`put` without room fails the test; so does reading more than the firmware says it takes in a period."""

    def __init__(self, room: int = 256) -> None:
        self.now = 0
        self.incoming: deque[int] = deque()
        self.sent = bytearray()
        self.capacity = room
        self.taken = 0  # bytes read and sent in this period
        self.given = 0
        self.most_taken = 0
        self.most_given = 0

    def now_ms(self) -> int:
        return self.now

    def end_period(self) -> None:
        self.most_taken = max(self.most_taken, self.taken)
        self.most_given = max(self.most_given, self.given)
        self.taken = self.given = 0
        self.now = (self.now + 5) & 0x3FFFFFFF

    def get(self) -> int:
        if not self.incoming:
            return -1
        self.taken += 1
        return self.incoming.popleft()

    def room(self) -> int:
        return self.capacity - self.given

    def put(self, byte: int) -> None:
        assert self.given < self.capacity, "put without room"
        self.given += 1
        self.sent.append(byte)


IN_A_PERIOD = 5
OUT_A_PERIOD = 14


class Handler:
    """Remembers what it was asked; refuses or raises where a test says so."""

    def __init__(self) -> None:
        self.calls: list[tuple[str, dict[str, Any], bool]] = []
        self.refuse: dict[str, Exception] = {}

    def call(self, method: str, params: dict[str, Any], crc_ok: bool) -> list[tuple[str, Any]]:
        self.calls.append((method, params, crc_ok))
        if method in self.refuse:
            raise self.refuse[method]
        return [("t", 5)]


class Bench:
    """A wire on a board of its own."""

    def __init__(self, room: int = 256, capacity: int = 64) -> None:
        self.board = LinkBoard(room)
        self.ring = Ring(capacity)
        self.handler = Handler()
        self.wire = Wire(self.board, self.ring, self.handler, 1)
        self.most_calls = 0

    def step(self, periods: int = 1) -> None:
        for _ in range(periods):
            before = len(self.handler.calls)
            self.wire.step(self.board.now)
            self.most_calls = max(self.most_calls, len(self.handler.calls) - before)
            self.board.end_period()

    def feed(self, data: bytes, gap: int = 0, periods: int = 0) -> list[dict[str, Any]]:
        """Send bytes, `gap` periods between each two (0: all at once), then step until all is read and answered."""
        if gap:
            for byte in data:
                self.board.incoming.append(byte)
                self.step(gap)
        else:
            self.board.incoming.extend(data)
        self.step(periods or len(data) // IN_A_PERIOD + 100)
        return self.lines()

    def lines(self) -> list[dict[str, Any]]:
        """The whole lines sent so far, each at most as long as allowed."""
        whole, _, rest = bytes(self.board.sent).rpartition(b"\n")
        self.board.sent[:] = rest
        for line in whole.split(b"\n"):
            assert len(line) < LINE
        return [json.loads(line) for line in whole.split(b"\n") if line]


def brief(lines: list[dict[str, Any]]) -> list[tuple[Any, Any, Any]]:
    return [
        (line["id"], line.get("error", {}).get("code"), line.get("error", {}).get("data")) for line in lines
    ]
