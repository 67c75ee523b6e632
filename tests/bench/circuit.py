"""How many control periods the emulated box does, as ratios to an empty loop: `python -m
tests.bench.circuit`.

The aim is 200 x real time for firmware, physics, wire and host together: 40,000 periods a second, of which
the world may take a fifth. Nothing here is asserted; compare ratios between machines, not microseconds.
"""

from __future__ import annotations

import time
from collections.abc import Callable

from dwellbench.emulator.reference import bits
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.world import World

_OUT = bits("outputs")
_CHARGE = _OUT["charge"] | _OUT["bleed_open"]
_HOLD = _CHARGE | _OUT["low_open"]
_LADDER = "absorption = [[0.1, 0.001], [1.0, 0.001], [10.0, 0.001], [100.0, 0.001]]\n"
PARTS = {
    "no absorption": "capacitance_F = 47e-9\n",
    "film, four branches": "capacitance_F = 47e-9\n" + _LADDER,
    "superlinear": "capacitance_F = 47e-9\nsuperlinear = {at_V = 300.0, ohm_there = 1e9, exponent = 6.0}\n"
    + _LADDER,
    "forming": "capacitance_F = 10e-6\n" + _LADDER + "[part.forming]\nformed_V = 250.0\n",
}


def _best(work: Callable[[int], None], count: int, tries: int = 5) -> float:
    """Least seconds a turn of several tries."""
    times = []
    for _ in range(tries):
        begin = time.perf_counter()
        work(count)
        times.append((time.perf_counter() - begin) / count)
    return min(times)


def _empty(count: int) -> None:
    for _ in range(count):
        pass


def _holding(part: str) -> Callable[[int], None]:
    world = World(Scenario.parse("[[part]]\n" + part), 1)
    outputs = (
        _CHARGE if "forming" in part else _HOLD
    )  # beyond a megohm's range the clamp would be what is measured

    def work(count: int) -> None:
        period = world.period
        for _ in range(count):
            period(outputs, 400_000, 1, 1, 0, 9)

    work(1000)
    return work


def _ramping(count: int) -> None:
    world = World(Scenario.parse("[[part]]\n" + PARTS["film, four branches"]), 1)
    for k in range(count):
        world.period(_CHARGE, 500 * (k % 1000), 1, 1, 0, 9)


def _switching(count: int) -> None:
    world = World(Scenario.parse("[[part]]\n" + PARTS["film, four branches"]), 1)
    for k in range(count):
        world.period(_HOLD if k // 8 % 2 else 0, 100_000, 1, 1, 0, 9)


def main() -> None:
    """Print one line a case."""
    empty = _best(_empty, 1_000_000)
    print(f"empty loop {empty * 1e9:.1f} ns a turn")
    cases = {f"hold, {name}": _holding(part) for name, part in PARTS.items()}
    cases |= {"ramp of the supply": _ramping, "four relays thrown every 40 ms": _switching}
    for name, work in cases.items():
        each = _best(work, 20_000)
        print(
            f"{name:32} {each * 1e6:6.2f} us a period, "
            f"{each / empty:6.0f} empty turns, {0.005 / each:7.0f} x real time"
        )


if __name__ == "__main__":
    main()
