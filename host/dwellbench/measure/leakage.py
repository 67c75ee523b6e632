"""What flows at the end of the dwell: the conventional total, and the interval in which conduction must lie.

The total is the shunt current at the stated time. Of it, C dV/dt belongs to a drifting supply and V /
R_fixture to the empty clips. What is still absorbed then cannot be told from conduction by its value, only by
its slope: on a decay t^-n the absorption is about t |di/dt| (n = 1), and never more than t |di/dt| / 0.6. So
conduction lies between i - t |di/dt| / 0.6 and i; its standard uncertainty takes half the absorption, the
doubt of C dV/dt and of the zero, and the noise. A shape fitted through the decay would promise a hundred
times more and be wrong by as much as the absorption itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from dwellbench.measure.least_squares import line
from dwellbench.measure.settled import Settled
from dwellbench.measure.trace import Bools, Circuit, Floats, Trace

LEAST_EXPONENT = 0.6
ABSORPTION_U = 0.5
_LEAST_ROWS = 5
_SHARE = 0.15  # of the time at voltage, its end, is averaged
_WINDOW_S = (3.0, 15.0)
_SHAPE_U = 0.3  # of what a row is brought along the decay: the shape is not quite 1/t
_RISES = 0.03  # t di/dt as a share of the current, above which it counts as rising
BEAT_ROWS = 5.0  # rows that do not scatter independently: ripple beats with the sampling over about this many
_SLOPE_FROM = 0.5  # the slope is taken over the last half of the dwell
_DRIFT_V_PER_S = 1e-4  # of the warm supply: what C dV/dt may hide below the voltage's own noise
_LOUD = 6.0  # deviations of a row from its neighbours' median above which it is a burst, not noise


@dataclass(frozen=True)
class Leakage:
    """At `time_s` after the voltage was in. Amperes, volts; `u_read_A` noise and zero, without gain or
    absorption.

    `charging_A` is C dV/dt, `fixture_A` the clips' share, `absorbed_A` t |di/dt| of the decay (0 when it does
    not fall).
    """

    time_s: float
    volts_V: float
    total_A: float
    u_read_A: float
    charging_A: float
    u_charging_A: float
    fixture_A: float
    u_fixture_A: float
    absorbed_A: float
    u_absorbed_A: float
    slope_per_s: float  # relative change of the current per second at the end
    rises: bool  # beyond noise, and by more than it should stand still
    shunt_ohm: float
    rows: int
    u_zero_A: float = 0.0  # of `u_read_A`, the part that is the zero's

    @property
    def through_A(self) -> float:
        """What flows through the part itself at that time: conduction and absorption."""
        return self.total_A - self.charging_A - self.fixture_A

    @property
    def u_through_A(self) -> float:
        """Standard uncertainty of `through_A`, gains left out."""
        return sqrt(self.u_read_A**2 + self.u_charging_A**2 + self.u_fixture_A**2)

    @property
    def conduction_A(self) -> float:
        """Best single figure for conduction alone."""
        return self.through_A - self.absorbed_A

    @property
    def u_conduction_A(self) -> float:
        """u^2 = noise^2 + zero^2 + (half the absorption)^2 + (C drift)^2 + (fixture)^2."""
        return hypot(self.u_through_A, hypot(ABSORPTION_U * self.absorbed_A, self.u_absorbed_A))

    @property
    def least_A(self) -> float:
        """Lower end of the interval for conduction, before measurement doubt."""
        return self.through_A - self.absorbed_A / LEAST_EXPONENT


def dwell_begin_s(trace: Trace) -> float | None:
    """The time at which the voltage was in: the beginning of the dwell's first row."""
    dwell = np.flatnonzero(trace.rows("dwell"))
    return float(trace.t_s[dwell[0]] - trace.interval_s[dwell[0]]) if dwell.size else None


def read_leakage(
    trace: Trace, circuit: Circuit, settled: Settled, capacitance_F: float | None, at_s: float | None = None
) -> Leakage | None:
    """Read the current at `at_s` after the voltage was in (the end of the dwell if None); None without
    settled rows there.
    """
    begin_s = dwell_begin_s(trace)
    if begin_s is None:
        return None
    until_s = float(trace.t_s[settled.dwell][-1]) - begin_s if at_s is None else at_s
    window_s = min(max(_SHARE * until_s, min(_WINDOW_S[0], _SLOPE_FROM * until_s)), _WINDOW_S[1])
    since_s = trace.t_s - begin_s
    rows = settled.readings & (since_s > until_s - window_s - 1e-9) & (since_s <= until_s + 1e-6)
    rows &= trace.shunt_ohm == (trace.shunt_ohm[rows][-1] if rows.any() else 0.0)
    if int(rows.sum()) < _LEAST_ROWS or float(since_s[rows][-1]) < until_s - 0.5 * window_s:
        return None
    return _read(trace, circuit, settled, capacitance_F, rows, since_s, until_s)


def _read(
    trace: Trace,
    circuit: Circuit,
    settled: Settled,
    capacitance_F: float | None,
    rows: Bools,
    since_s: Floats,
    until_s: float,
) -> Leakage:
    middle_s = since_s - 0.5 * trace.interval_s
    quiet = rows & ~bursts(trace.i_shunt_A, rows)
    decay = _Decay(trace, settled, middle_s, until_s)
    current, u_current = decay.at_end(trace.i_shunt_A, quiet)
    volts_V = line(middle_s[quiet], trace.across_V[quiet], until_s).at
    charging_A, u_charging_A = _charging(trace, settled, middle_s, until_s, capacitance_F or 0.0)
    fixture_A = volts_V / circuit.fixture_ohm
    return Leakage(
        time_s=until_s,
        volts_V=volts_V,
        total_A=current,
        u_read_A=hypot(u_current, float(trace.u_offset_A[quiet].max())),
        charging_A=charging_A,
        u_charging_A=u_charging_A,
        fixture_A=fixture_A,
        u_fixture_A=fixture_A * circuit.u_fixture_rel,
        absorbed_A=max(decay.part_A, 0.0),
        u_absorbed_A=decay.u_part_A,
        slope_per_s=-decay.part_A / decay.since_s / current if current else 0.0,
        rises=-decay.part_A > max(3.0 * decay.u_part_A, _RISES * abs(current)),
        shunt_ohm=float(trace.shunt_ohm[quiet][-1]),
        rows=int(quiet.sum()),
        u_zero_A=float(trace.u_offset_A[quiet].max()),
    )


class _Decay:
    """The fall of the current over the last half of its time, as a line in 1/t: t |di/dt| at the end is its slope.

    Exact for a decay t^-1, and within a tenth for exponents from 0.6 to 1.2. The time counts from when half the voltage was
    on the part, for the part absorbs while it is charged: `since_s` is that time at the end.
    """

    def __init__(self, trace: Trace, settled: Settled, middle_s: Floats, until_s: float) -> None:
        origin_s = _applied_s(trace, middle_s)
        self.since_s = until_s - origin_s
        self.shape = self.since_s / np.maximum(middle_s - origin_s, 0.1) - 1.0
        rows = _late(trace, settled, middle_s, until_s)
        rows &= ~bursts(trace.i_shunt_A, rows)
        fit = line(self.shape[rows], trace.i_shunt_A[rows])
        self.part_A, self.u_part_A = fit.slope, fit.u_slope * sqrt(BEAT_ROWS)

    def at_end(self, amps: Floats, rows: Bools) -> tuple[float, float]:
        """The current at the end: the mean of `rows`, each brought there along the decay; and its uncertainty."""
        brought = amps[rows] - self.part_A * self.shape[rows]
        u_mean = float(np.std(brought)) * sqrt(BEAT_ROWS / brought.size)
        way = abs(float(np.mean(self.shape[rows])))
        return float(np.mean(brought)), hypot(u_mean, way * hypot(self.u_part_A, _SHAPE_U * self.part_A))


def _applied_s(trace: Trace, middle_s: Floats) -> float:
    """When half of the dwell's voltage was on the part, on the clock of `middle_s`; 0 where the charge was not recorded."""
    charge = np.flatnonzero(trace.rows("charge"))
    if not charge.size:
        return 0.0
    half_V = 0.5 * float(np.median(trace.across_V[trace.rows("dwell")]))
    there = charge[trace.across_V[charge] >= half_V]
    return min(float(middle_s[there[0]]), 0.0) if there.size else 0.0


def bursts(amps: Floats, rows: Bools) -> Bools:
    """Rows that stand out from the run of the others by far more than these scatter (median, robust). Shape
    of `rows`.
    """
    at = np.flatnonzero(rows)
    out = np.zeros(rows.size, dtype=bool)
    if at.size < _LEAST_ROWS:
        return out
    values = amps[at]
    flat = values - np.polynomial.polynomial.polyval(at - at[0], _robust_line(at - at[0], values))
    spread = 1.4826 * float(np.median(np.abs(flat - np.median(flat))))
    loud = np.abs(flat - np.median(flat)) > _LOUD * max(spread, 1e-15)
    if 2 * int(loud.sum()) < at.size and at.size - int(loud.sum()) >= 3:
        out[at[loud]] = True
    return out


def _robust_line(x: NDArray[np.int64], y: Floats) -> tuple[float, float]:
    """Slope as the median between the two halves' rows, intercept as the median of what is left."""
    half = x.size // 2
    slope = float(np.median((y[-half:] - y[:half]) / (x[-half:] - x[:half])))
    return float(np.median(y - slope * x)), slope


def _late(trace: Trace, settled: Settled, middle_s: Floats, until_s: float) -> Bools:
    """Settled rows of the last half of the time at voltage, on the shunt of the end."""
    rows = settled.readings & (middle_s >= _SLOPE_FROM * until_s) & (middle_s <= until_s)
    return np.asarray(
        rows & (trace.shunt_ohm == trace.shunt_ohm[rows][-1]) & (trace.range_V == trace.range_V[rows][-1])
    )


def _charging(
    trace: Trace, settled: Settled, middle_s: Floats, until_s: float, capacitance_F: float
) -> tuple[float, float]:
    """C dV/dt at the end and its doubt: taken off only where the voltage's slope stands out of its noise."""
    rows = _late(trace, settled, middle_s, until_s)
    if int(rows.sum()) < _LEAST_ROWS:
        return 0.0, capacitance_F * _DRIFT_V_PER_S
    slope = line(middle_s[rows], trace.across_V[rows], until_s)
    bent = _bent(middle_s[rows], trace.across_V[rows], until_s)
    u_slope = hypot(slope.u_slope, abs(bent - slope.slope) / 2.0)
    if abs(slope.slope) < 2.0 * u_slope:
        return 0.0, capacitance_F * min(hypot(abs(slope.slope), u_slope), 10.0 * _DRIFT_V_PER_S)
    return capacitance_F * bent, capacitance_F * u_slope


def _bent(x: Floats, y: Floats, at: float) -> float:
    """Slope at the end of a parabola: what a voltage that still approaches its end has left."""
    if x.size < 2 * _LEAST_ROWS:
        return line(x, y, at).slope
    return float(np.polynomial.polynomial.polyfit(x - at, y, 2)[1])
