"""What a whole run puts on the wire, by kind of line, and what share of the link's capacity that is.

python -m tests.bench.wire_bytes
"""

from __future__ import annotations

import json
from collections import Counter

from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.wire.core import Client
from dwellbox.wire import _IN

PERIOD_S = 0.005
PLAN = {"run_key": "k", "volts_mv": 250_000, "dwell_ms": 60_000, "expect_pf": 47_000}


def traffic() -> tuple[list[bytes], int, float, int]:
    """Lines of the box from a run's begin to its end, bytes that the host sent, seconds, bytes out in the fullest period."""
    box = InProcessBox(Scenario.load("film"), 1)
    client = Client()
    box.link.attach(True)
    out = bytearray()
    sent = 0
    begin = 7000
    periods = fullest = 0
    for period in range(30_000):
        line = client.notify("keepalive") if period % 100 == 0 else b""
        line += client.request("hello")[0] if period == 10 else b""
        line += client.request("run", PLAN)[0] if period == begin else b""
        box.link.push(line)
        box.tick()
        data = box.link.pull()
        if period >= begin:
            out += data
            sent += len(line)
            periods += 1
            fullest = max(fullest, len(data))
        if b'"method":"done"' in out[-600:] and out.endswith(b"\n"):
            break
    return bytes(out).splitlines(keepends=True), sent, periods * PERIOD_S, fullest


def main() -> None:
    """Print lines, bytes and rows by kind."""
    lines, sent, seconds, fullest = traffic()
    count: Counter[str] = Counter()
    size: Counter[str] = Counter()
    rows = 0
    for line in lines:
        message = json.loads(line)
        kind = message.get("method", "answer")
        count[kind] += 1
        size[kind] += len(line)
        rows += len(message["params"]["rows"]) if kind == "samples" else 0
    for kind, number in count.most_common():
        print(f"{kind:10}{number:7} lines{size[kind]:9} bytes{size[kind] / number:8.0f} a line")
    total = sum(size.values())
    print(
        f"{size['samples'] / rows:.0f} bytes a sample, {rows / count['samples']:.2f} samples a line, {rows / seconds:.1f} a second"
    )
    print(
        f"out {total / seconds:.0f} bytes/s, {total / seconds / (fullest / PERIOD_S):.0%} of what its fullest period sent"
    )
    print(
        f"in {sent / seconds:.0f} bytes/s, {sent / seconds / (_IN / PERIOD_S):.0%} of what it takes at most"
    )


if __name__ == "__main__":
    main()
