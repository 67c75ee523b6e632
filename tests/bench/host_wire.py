"""How many samples a second the host's side of the wire takes in, checked and in order, against what a box sends.

python -m tests.bench.host_wire
"""

from __future__ import annotations

import time

from dwellbench.wire.core import Client, Notice, seal
from dwellbench.wire.inbox import Inbox

ROWS = 3000
A_LINE = 3  # rows that fit one line when the box catches up
LIVE = 10  # windows a second
ROW = [6, 2, 1, 18, -123456, -7000, -6800, 19, 4000, 190, 220, 0, 16720, 13000, 0, 0]


def lines() -> list[bytes]:
    """Samples as the box sends them."""
    made = []
    for first in range(0, ROWS, A_LINE):
        rows = [[n, n * 100, *ROW] for n in range(first, first + A_LINE)]
        params = {"n": first, "boot": 1, "rows": rows}
        made.append(seal({"jsonrpc": "2.0", "method": "samples", "params": params}))
    return made


def taken_in(data: list[bytes]) -> float:
    """Seconds to take them all in, the best of three."""
    best = float("inf")
    for _ in range(3):
        client, inbox = Client(), Inbox()
        begin = time.perf_counter()
        for line in data:
            for event in client.receive(line):
                assert isinstance(event, Notice)
                inbox.take(event)
        best = min(best, time.perf_counter() - begin)
        assert len(inbox.ready) == ROWS
    return best


def main() -> None:
    """Print the ratio."""
    a_second = ROWS / taken_in(lines())
    print(f"{a_second:.0f} samples a second taken in: {a_second / LIVE:.0f} times what a box sends")


if __name__ == "__main__":
    main()
