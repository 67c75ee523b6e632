"""How long an analysis takes beside one pass over its arrays, and what share of a dwell need not be held:
`python -m tests.bench.analyse`.

Ratios and counts to compare between machines; nothing is asserted. The second table is the simulation behind ending a dwell
early: parts in a coupling place, a fifth of them leaky, a third of the leaky ones silent until a random time.
"""

from __future__ import annotations

import random
import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np

from dwellbench.emulator.direct import record
from dwellbench.emulator.part_spec import LateLeak, PartSpec
from dwellbench.judge import judge, may_end
from dwellbench.limits.place import Place
from dwellbench.measure.calibrate import calibrate
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.csv_read import parse_csv
from dwellbench.measure.csv_write import csv_text
from dwellbench.measure.estimates import estimate
from dwellbench.measure.raw import RawTrace
from dwellbench.measure.trace import Trace
from dwellbench.part import Part

PLACE = Place.parse("coupling@310V/470k")
LADDER = tuple((0.1 * 10.0**k, 8e-4) for k in range(5))


def best_s(work: Callable[[], object], tries: int = 7) -> float:
    """Least seconds of several tries."""
    times = []
    for _ in range(tries):
        begin = time.perf_counter()
        work()
        times.append(time.perf_counter() - begin)
    return min(times)


def made(part: PartSpec, volts: float, dwell_s: float, seed: int) -> Trace:
    """One direct run as a trace."""
    run = record(part, volts, dwell_s, seed)
    return calibrate(RawTrace.from_rows(run.rows), Calibration.from_json(run.calibration))


def film(farads: float, rated_V: float = 400.0) -> Part:
    """A film part as marked."""
    return Part("made", capacitance_F=farads, rated_V=rated_V, rated_kind="dc", dielectric="film")


def times() -> None:
    """What each step of an analysis costs, for a charge by ramp and by step and a dwell of 180 s."""
    print(
        f"{'180 s dwell':28}{'rows':>6}{'read':>9}{'estimate':>10}{'judge':>9}   (ms; ratio to one pass over the arrays)"
    )
    for name, farads in (("ramp, 47 nF", 47e-9), ("step, 1 uF", 1e-6), ("step, 22 uF", 22e-6)):
        trace = made(
            PartSpec(capacitance_F=farads, leakage_ohm=2e10, esr_ohm=0.5, absorption=LADDER), 400.0, 180.0, 1
        )
        text, part = csv_text(trace), film(farads)
        arrays = [getattr(trace, key) for key in ("t_s", "v_part_V", "i_shunt_A", "interval_s", "shunt_ohm")]
        unit = best_s(lambda a=arrays: [float(np.sum(x)) for x in a])  # type: ignore[misc]
        cells = [
            best_s(lambda t=text: parse_csv(t), 3),  # type: ignore[misc]
            best_s(lambda t=trace, p=part: estimate(t, p.capacitance_F, p.dielectric)),  # type: ignore[misc]
            best_s(lambda t=trace, p=part: judge(t, p, PLACE)),  # type: ignore[misc]
        ]
        shown = "".join(f"{cell * 1e3:7.1f} ({cell / unit:4.0f})" for cell in cells)
        print(f"{name:28}{len(trace):6}{shown}")


def so_far(trace: Trace, dwell_s: float) -> Trace:
    """What had come after so much of the dwell."""
    first = float(trace.t_s[trace.rows("dwell")][0]) - 0.1
    keep = trace.t_s <= first + dwell_s + 1e-6
    arrays = {name: getattr(trace, name)[keep] for name in trace.__dataclass_fields__ if name != "header"}
    return Trace(**arrays, header=trace.header)


def early(parts: int = 200, full_s: float = 60.0) -> None:
    """Mean dwell and false accepts when a dwell may end early."""
    chance = random.Random(8)
    held: list[float] = []
    late, false_steady, false_late, bad = 0, 0, 0, 0
    for seed in range(parts):
        leaky = chance.random() < 0.2
        silent = leaky and chance.random() < 0.33
        ohm = 10 ** (chance.uniform(6.5, 9.0) if leaky else chance.uniform(10.0, 12.0))
        farads = 10 ** chance.uniform(-8.0, -6.4)
        spec = PartSpec(
            capacitance_F=farads, leakage_ohm=1e12 if silent else ohm, esr_ohm=0.5, absorption=LADDER
        )
        if silent:
            spec = replace(spec, late_leak=LateLeak(after_s=chance.uniform(0.0, full_s), ohm=ohm))
        trace = made(spec, 400.0, full_s, seed)
        answer, at_s = None, full_s
        for when in range(10, int(full_s), 5):
            answer = may_end(so_far(trace, when + 0.1), film(farads), PLACE)
            if answer is not None:
                at_s = float(when)
                break
        held.append(at_s)
        bad += leaky
        late += silent
        accepted = answer is not None and answer.verdict == "fit"
        false_late += accepted and silent
        false_steady += accepted and leaky and not silent
    print(f"\n{parts} parts, {bad} leaky, {late} of them late; dwell {np.mean(held):.1f} s of {full_s:.0f} s")
    print(f"accepted early: {false_steady} steady leaks, {false_late} late ones")


if __name__ == "__main__":
    times()
    early()
