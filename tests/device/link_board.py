"""The parts of a board that the wire touches: a clock and a link with a given room, which enforces the seam's rules."""

from __future__ import annotations

from collections import deque


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
