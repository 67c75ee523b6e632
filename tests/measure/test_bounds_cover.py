"""Do 95 % bounds hold the truth in about 95 of 100 cases? Over parts and boxes drawn at random, through converter codes.

The traces come from the emulated circuit and front end (noise, offsets, gains within a calibration of stated uncertainty,
ripple, mains, drift, a clock that is off); the truth is the circuit's own.
"""

from __future__ import annotations

import random
from functools import cache
from math import log10

import pytest

from dwellbench.emulator.direct import Recording, record
from dwellbench.emulator.part_spec import PartSpec
from dwellbench.measure.calibrate import calibrate
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.estimates import Estimates, estimate
from dwellbench.measure.raw import RawTrace
from dwellbench.quantity import Quantity

PARTS = 60
# kind: farads from, to; ohms from, to; share absorbed in a decade; dwell in s
KINDS = {
    "film": (1e-9, 5e-6, 1e8, 1e12, 8e-4, 30.0),
    "paper": (5e-9, 2e-6, 1e8, 1e11, 1e-2, 30.0),
    "mica": (5e-11, 1e-8, 1e9, 1e12, 2e-3, 30.0),
    "electrolytic": (2e-6, 4e-5, 5e6, 1e9, 1.5e-2, 60.0),
}


@cache
def measured(kind: str) -> list[tuple[Recording, Estimates]]:
    """Recordings of random parts of one kind in random boxes, with what was made of them."""
    chance = random.Random(f"bounds of {kind}")
    least_F, most_F, least_ohm, most_ohm, share, dwell_s = KINDS[kind]
    found = []
    for seed in range(PARTS):
        ladder = tuple(
            (0.1 * 10.0**k * chance.uniform(0.6, 1.6), share * chance.uniform(0.5, 1.6)) for k in range(5)
        )
        farads = 10.0 ** chance.uniform(log10(least_F), log10(most_F))
        ohm = 10.0 ** chance.uniform(log10(least_ohm), log10(most_ohm))
        part = PartSpec(capacitance_F=farads, leakage_ohm=ohm, esr_ohm=0.5, absorption=ladder)
        made = record(part, chance.choice((100.0, 250.0, 400.0, 600.0)), dwell_s, seed)
        trace = calibrate(RawTrace.from_rows(made.rows), Calibration.from_json(made.calibration))
        found.append((made, estimate(trace, farads * chance.uniform(0.9, 1.1), kind)))
    return found


def misses(kind: str, name: str, truth: str) -> int:
    """How many bounds do not hold the truth; a quantity that is not told at all is none."""
    count = 0
    for made, told in measured(kind):
        quantity: Quantity | None = getattr(told, name)()
        if quantity is None:
            continue
        low = -float("inf") if quantity.low is None else quantity.low
        high = float("inf") if quantity.high is None else quantity.high
        count += not low <= getattr(made, truth) <= high
    return count


@pytest.mark.parametrize("kind", sorted(KINDS))
@pytest.mark.parametrize(
    ("name", "truth"),
    [("capacitance_F", "capacitance_F"), ("total_current_A", "shunt_A"), ("leakage_A", "leakage_A")],
)
def test_bounds_hold_the_truth(kind: str, name: str, truth: str) -> None:
    """Of 60, three misses are expected; more than eight come by chance once in a hundred times."""
    assert misses(kind, name, truth) <= 8


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_bounds_say_something(kind: str) -> None:
    """Bounds so wide that they hold everything would pass the test above."""
    told = [e.capacitance for _, e in measured(kind) if e.capacitance is not None]
    assert len(told) >= 0.9 * PARTS
    usual = sorted(e.u / e.value for e in told)[len(told) // 2]
    assert usual < {"film": 0.004, "paper": 0.03, "mica": 0.02, "electrolytic": 0.06}[kind]
    read = [e.leakage for _, e in measured(kind) if e.leakage is not None]
    assert len(read) >= 0.9 * PARTS


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_steady_parts_show_no_events(kind: str) -> None:
    assert sum(e.events.count > 0 for _, e in measured(kind)) <= 1
