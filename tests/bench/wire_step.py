"""What the wire costs in a period of the reference board, what it carries, and what it takes from the heap.

    python -m tests.bench.wire_step

The budget is 1.2 ms of a period of 5 ms. Assumed beside the model of `board_cost`: a byte from the link 40 us, a byte to it 30 us,
each question for room 25 us (one call of the port's own poll and stream functions and a method around it), of which the board is
asked once for every byte, since its port cannot say how much room there is; machine code by the count of its instructions.
"""

from __future__ import annotations

import json
import subprocess
import zlib
from collections.abc import Callable, Iterable
from pathlib import Path
from types import CodeType, FrameType
from typing import Any

from dwellbench import assets
from dwellbench.emulator import lockstep
from dwellbox.ring import Ring
from dwellbox.wire import Wire

from .board_cost import Count

GET_US, PUT_US, ROOM_US = 40.0, 30.0, 25.0
PERIOD_MS = 5
SAMPLE = (1_000_005, 6, 2, 1, 18, 288_000, 15_990, 16_010, 20, -3, -4, 5, 0, 16_384, 16_390, 0, 0)
STATUS: list[tuple[str, Any]] = [
    *(("state", "dwell"), ("stage", "dwell"), ("safe", False), ("energised", True), ("part_mv", 412_000)),
    *(
        ("supply_mv", 415_000),
        ("temp_mc", 23_100),
        ("lid", "closed"),
        ("locked", True),
        ("stop", False),
        ("hv", True),
    ),
    *(("fault", None), ("run", 5), ("run_key", "abcdef0123456789"), ("t", 40_000), ("left_ms", 38_000)),
    *(("n", 512), ("boot", 3), ("dropped", 0)),
]
RUN = {
    "run_key": "abcdef0123456789",
    "volts_mv": 400_000,
    "dwell_ms": 60_000,
    "expect_pf": 47_000,
    "low_pct": 50,
}
RUN |= {
    "high_pct": 100,
    "polar": False,
    "ceiling_ua": 500,
    "bleed_ms": 10_000,
    "recovery_ms": 0,
    "nudge": True,
}

# Machine code: entry and exit 10 us, then per byte, or per number of a row.
_NATIVE: dict[str, Callable[[FrameType], float]] = {
    "put_bytes": lambda frame: 10 + 0.1 * int(frame.f_locals["length"]),
    "hex_crc": lambda frame: 14 + 0.3 * int(frame.f_locals["length"]),
    "put_number": lambda frame: 14,
    "put_row": lambda frame: 10 + 17 * 12,
}


class _Link:
    """A link that counts its calls; the board asks for room byte by byte."""

    def __init__(self) -> None:
        self.incoming = bytearray()
        self.sent = bytearray()
        self.us = 0.0

    def now_ms(self) -> int:
        return 0

    def get(self) -> int:
        self.us += GET_US
        return self.incoming.pop(0) if self.incoming else -1

    def room(self) -> int:
        self.us += ROOM_US
        return 1

    def put(self, byte: int) -> None:
        self.us += PUT_US
        self.sent.append(byte)


class _Handler:
    def call(self, method: str, params: dict[str, Any], crc_ok: bool) -> list[tuple[str, Any]]:
        return STATUS


def _counted(code: CodeType) -> bool:
    path = Path(code.co_filename)
    return path.parent.name == "dwellbox" and path.name != "plain.py"


def _asked(method: str, params: dict[str, Any]) -> bytes:
    body = json.dumps(
        {"jsonrpc": "2.0", "id": 1, "method": method, "params": params}, separators=(",", ":")
    ).encode()[:-1]
    return body + b',"crc":"%08x"}\n' % zlib.crc32(body)


class Bench:
    """A wire with a host that has said hello."""

    def __init__(self) -> None:
        self.link = _Link()
        self.ring = Ring(1280)
        self.wire = Wire(self.link, self.ring, _Handler(), 3)
        self._count = Count(_counted, _NATIVE)
        self.link.incoming += _asked("hello", {})
        self.until_quiet()
        self.link.sent.clear()

    def period(self) -> float:
        """Microseconds of one step, the link's calls included."""
        self.link.us = 0.0
        return self._count.of(self.wire.step, 0) + self.link.us

    def until_quiet(self) -> list[float]:
        """Periods until nothing is on its way."""
        periods = [self.period()]
        while self.wire.pending() or self.link.incoming:
            periods.append(self.period())
        return periods

    def samples(self, count: int) -> None:
        for _ in range(count):
            self.ring.sample(*SAMPLE)


def _told(name: str, periods: Iterable[float], note: str = "") -> None:
    us = list(periods)
    print(f"{name:28}{len(us):8}{sum(us) / len(us):10.0f}{max(us):10.0f}   {note}")


def periods_table() -> None:
    """Each kind of work alone, from its first period to its last."""
    print(f"{'':28}{'periods':>8}{'mean us':>10}{'worst us':>10}")
    bench = Bench()
    _told("nothing to do", bench.until_quiet())
    bench.samples(1)
    _told("one live sample", bench.until_quiet(), f"{len(bench.link.sent)} bytes on the wire")
    bench.link.sent.clear()
    bench.samples(30)
    periods = []
    while bench.wire._live < bench.ring.n or bench.wire.pending():
        periods.append(bench.period())
    rows_a_second = 30 / (len(periods) * PERIOD_MS / 1000)
    _told(
        "30 samples that waited",
        periods,
        f"{len(bench.link.sent) / 30:.0f} bytes a sample, {rows_a_second:.0f} samples a second",
    )
    bench.ring.state(5, 1, 1, "held")
    _told("an event", bench.until_quiet())
    for method, params in (("keepalive", {}), ("status", {}), ("run", RUN)):
        bench.link.incoming += _asked(method, params)
        _told(f"{method} and its answer", bench.until_quiet(), f"{len(_asked(method, params))} bytes in")


def heap_table() -> None:
    """Bytes of heap a period takes under the real MicroPython, whose garbage a later collection finds."""
    script = Path(__file__).with_name("wire_step_on_micropython.py")
    environment = {"MICROPYPATH": f".frozen:{assets.device()}"}
    done = subprocess.run(
        [lockstep.interpreter(), "-X", "heapsize=1M", str(script)],
        env=environment,
        capture_output=True,
        text=True,
        check=True,
    )
    print("\nheap under MicroPython (64-bit build: twice the board's)\n" + done.stdout, end="")


def main() -> None:
    """Print both tables."""
    periods_table()
    heap_table()


if __name__ == "__main__":
    main()
