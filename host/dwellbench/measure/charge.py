"""Capacitance from the charge that flowed: the primary result, since it needs neither the charge resistor nor
a model.

C = (charge through the shunt - what leaked meanwhile) / (change of the voltage across the part), over the
longest stretch of charging read without a break on one shunt. Means of windows are compared with means of
windows: the charge that had flowed by the middle of a window is the sum before it and a share of its own, which
follows from how fast the current falls there (`_middle`); no voltage has to be guessed at the edge of a window.

How much leaks while the voltage rises is known least: a leak may rise faster than the voltage, a forming
electrolytic leaks most at the end of its charging, and what is absorbed looks like leakage. So the sum may be
cut before the charge is in, where little has leaked yet. Of several cuts the one with the least doubt is
taken; how far they differ is part of their doubt.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot

import numpy as np

from dwellbench.measure.estimate import Estimate
from dwellbench.measure.reference import FIXTURE_U_F
from dwellbench.measure.trace import Bools, Circuit, Floats, Trace

_LOW_SHUNT_OHM = 10e3  # below this the node follows within a window whatever the part
_CUTS = (0.1, 0.2, 0.3, 0.5, 0.63, 0.8, 0.9, 0.95, 0.99)
_IN = 0.999  # of the rise: the charge is in, and noise only grows after it
_LEAST_RISE_V = 2.0
_LEAST_ROWS = 3
_STEADY_ROWS = 5
_EARLIEST_ROW = 5
_TREND_U = 3.0  # doubts that two sums must differ by before the difference is followed
_STEEPEST = 5.0  # decay of the current from one row to the next, natural logarithm
_BEGINS = 5  # rows at which a sum may begin: the first holds the step, unless it came before
_LEAK_U = 0.003  # what a leak that is read twice alike may still have been in between
_LOW_V = (15.0, 55.0)
_LOW_RISE_V = 10.0
_SMOOTH_ROWS = 10  # windows in a time constant from which on slopes between windows can be trusted


@dataclass(frozen=True)
class Stretch:
    """Charging read without a break on one shunt: row numbers `first` to `last`, both included."""

    first: int
    last: int


@dataclass(frozen=True)
class Leaks:
    """Conductances in siemens while the voltage rises: at its beginning (the look, else the dwell) and at its
    end.
    """

    first_S: float | None
    last_S: float | None

    def at(self, share: float) -> tuple[float, float]:
        """Conductance and its doubt up to a share of the voltage: a leak grows at least in proportion to the
        voltage, or not at all.
        """
        last_S = self.last_S or 0.0
        first_S = last_S if self.first_S is None else self.first_S
        half = (last_S - first_S) * share / 2.0
        return first_S + half, hypot(half, _LEAK_U * first_S)


def counted(trace: Trace) -> Bools:
    """Rows whose current counts as charge: readable, and settled unless the shunt is low enough to follow at
    once.
    """
    follows = trace.shunt_ohm < _LOW_SHUNT_OHM
    return np.asarray(trace.rows("charge", "dwell") & trace.readable & (follows | ~trace.unsettled))


def stretch_of(trace: Trace) -> Stretch | None:
    """The stretch with the greatest rise of voltage that begins in the charge; None when there is none."""
    usable = counted(trace)
    broken = trace.gap | (np.diff(trace.shunt_ohm, prepend=trace.shunt_ohm[:1]) != 0.0)
    begins = usable & (np.concatenate(([True], ~usable[:-1])) | broken)
    ends = usable & np.concatenate((begins[1:] | ~usable[1:], [True]))
    charge, volts = trace.rows("charge"), trace.across_V
    best: Stretch | None = None
    best_V = _LEAST_RISE_V
    for first, last in zip(np.flatnonzero(begins), np.flatnonzero(ends), strict=True):
        rise_V = float(volts[last] - volts[first])
        if charge[first] and rise_V > best_V and last - first + 1 >= _LEAST_ROWS:
            best, best_V = Stretch(int(first), int(last)), rise_V
    return best


def low_volts(trace: Trace, stretch: Stretch | None) -> Stretch | None:
    """The part of a stretch between 15 and 55 V, where class II ceramic still has the value of its marking;
    None if the charging went through it too fast to see.
    """
    if stretch is None:
        return None
    volts = trace.across_V[stretch.first : stretch.last + 1]
    rows = np.flatnonzero((volts >= _LOW_V[0]) & (volts <= _LOW_V[1]))
    if rows.size < 2 or volts[rows[-1]] - volts[rows[0]] < _LOW_RISE_V or rows[-1] - rows[0] != rows.size - 1:
        return None
    return Stretch(stretch.first + int(rows[0]), stretch.first + int(rows[-1]))


def charge_balance(
    trace: Trace, circuit: Circuit, stretch: Stretch | None, leaks: Leaks | None = None
) -> Estimate | None:
    """Capacitance in farads, less the empty fixture's; None when no charging can be read."""
    if stretch is None:
        return None
    balance = _Balance(trace, stretch)
    leaks = balance.with_late(leaks or Leaks(None, None))
    sums = [balance.sum_to(cut, leaks) for cut in balance.cuts()]
    trend_F = balance.trend_F(sums)
    doubts = [hypot(one.u_own, (one.value - sums[0].value) / 2.0) for one in sums]
    best = int(np.argmin(doubts))
    if not np.isfinite(doubts[best]):
        return None  # the voltage only fell
    farads = sums[best].value - (trend_F if best == 0 else 0.0)
    u_own = hypot(doubts[best], trend_F / 2.0, FIXTURE_U_F)
    u_shared = abs(farads) * hypot(circuit.u_gain_i, circuit.u_gain_v)
    return Estimate(farads - circuit.fixture_F, u_own, u_shared, sums[best].rows)


class _Balance:
    """Charge, voltage and their integrals over one stretch. Cuts are row numbers within the stretch."""

    def __init__(self, trace: Trace, stretch: Stretch) -> None:
        rows = slice(stretch.first, stretch.last + 1)
        self.dt = trace.interval_s[rows]
        self.t = trace.t_s[rows] - 0.5 * self.dt
        self.amps = trace.i_shunt_A[rows]
        self.volts = trace.across_V[rows]
        middle_C, self.edge_C = _middle(self.amps, self.dt)
        self.charge = np.cumsum(self.amps * self.dt) - self.amps * self.dt + middle_C
        self.area = _running(self.volts, self.dt, self.t)
        self.u_offset_A = float(trace.u_offset_A[rows].max())
        self.code_A = float(trace.range_V[stretch.first] / 32768.0 / trace.shunt_ohm[stretch.first])
        self.full = min(max(self._reaches(_IN) + 1, 2), len(self.t) - 1)
        self.smooth = self._reaches(0.63) - self._reaches(0.05) >= _SMOOTH_ROWS

    def _reaches(self, share: float) -> int:
        return int(np.argmax(self.volts >= self.volts[0] + share * (self.volts[-1] - self.volts[0])))

    def cuts(self) -> list[int]:
        """Where the sum may end: when the charge is in, or earlier in a record that is smooth."""
        early = [self._reaches(share) for share in _CUTS] if self.smooth else []
        return [*(cut for cut in early if cut >= _EARLIEST_ROW), self.full]

    def sum_to(self, cut: int, leaks: Leaks) -> Estimate:
        """The capacitance with the sum ended at `cut`, begun at the row where that is surest."""
        begins = range(min(_BEGINS, max(cut // 3, 1)))
        ways = [self._between(begin, cut, leaks) for begin in begins]
        return min(ways, key=lambda way: way.u_own)

    def trend_F(self, sums: list[Estimate]) -> float:
        """How far the shortest sum is still off, when the next longer one differs: a leak that is not what it
        was taken for puts each off in proportion to its volt-seconds over volts.
        """
        if len(sums) < 2:
            return 0.0
        near, far = (self.area[k] / max(float(self.volts[k] - self.volts[0]), 1e-9) for k in self.cuts()[:2])
        step_F = sums[1].value - sums[0].value
        if far <= near or abs(step_F) < _TREND_U * hypot(sums[0].u_own, sums[1].u_own):
            return 0.0
        return float(step_F * near / (far - near))

    def _between(self, begin: int, cut: int, leaks: Leaks) -> Estimate:
        siemens, doubt_S = leaks.at(self.share(cut))
        rise_V = float(self.volts[cut] - self.volts[begin])
        if rise_V <= 0.0:
            return Estimate(0.0, np.inf)
        area = float(self.area[cut] - self.area[begin])
        dt = self.dt[begin : cut + 1]
        noise_C = hypot(self.code_A * float(np.sqrt(np.sum(dt**2))), self.u_offset_A * float(dt.sum()))
        edges_C = hypot(float(self.edge_C[begin]), float(self.edge_C[cut]))
        u_own = hypot(noise_C, edges_C, doubt_S * area) / rise_V
        value = (float(self.charge[cut] - self.charge[begin]) - siemens * area) / rise_V
        return Estimate(value, u_own, rows=cut - begin + 1)

    def share(self, cut: int) -> float:
        """Voltage at the cut as a share of that at the end."""
        return float(self.volts[cut] / self.volts[-1]) if self.volts[-1] else 1.0

    def with_late(self, leaks: Leaks) -> Leaks:
        """The leaks known from elsewhere, and the one at the end of this charge."""
        late_S = self._late_S()
        if late_S is not None:
            return Leaks(leaks.first_S if leaks.first_S is not None else leaks.last_S, late_S)
        if leaks.last_S is None and self.volts[-1] > 0.0:
            return Leaks(0.0, max(float(self.amps[-1] / self.volts[-1]), 0.0))
        return leaks

    def _late_S(self) -> float | None:
        """Conductance at the end of the charge: current less C dV/dt over voltage, C found on the way."""
        first = self.full + 1
        if len(self.t) - first < _STEADY_ROWS:
            if not self.smooth:
                return None
            first = len(self.t) - _STEADY_ROWS
        late = slice(first, min(first + 4 * _STEADY_ROWS, len(self.t)))
        t, volts, amps = self.t[late], self.volts[late], self.amps[late]
        if float(np.mean(volts)) <= 0.0 or self.volts[self.full] <= self.volts[0]:
            return None
        slope = float(np.polynomial.polynomial.polyfit(t - t[0], volts, 1)[1])
        rise_V = float(self.volts[self.full] - self.volts[0])
        siemens = 0.0
        for _ in range(4):
            farads = (
                self.charge[self.full] - self.charge[0] - siemens * (self.area[self.full] - self.area[0])
            ) / rise_V
            siemens = float(np.mean(amps) - farads * slope) / float(np.mean(volts))
        return siemens


def _running(values: Floats, dt: Floats, t: Floats) -> Floats:
    """The integral of `values` since the beginning, averaged over each window."""
    before = np.concatenate(([0.0], np.cumsum(values * dt)[:-1]))
    return np.asarray(before + values * dt / 2.0 - _slope(values, t) * dt**2 / 12.0)


def _middle(amps: Floats, dt: Floats) -> tuple[Floats, Floats]:
    """Charge by the middle of each row beyond that before it, and how far off it may be, coulombs.

    On a current that falls as e^-at the mean over a row of its own charge is i dt (1 / (1 - e^-a) - 1 / a), a counted in
    rows: half of it on a straight stretch. The decay is read from the rows on either side; how far these two differ is the
    doubt. A row before any current is sure; the first of a stretch may hold the step itself, anywhere in it.
    """
    size = np.maximum(np.abs(amps), 1e-30)
    decay = np.clip(-np.diff(np.log(size)), -_STEEPEST, _STEEPEST)
    decay[amps[1:] * amps[:-1] <= 0.0] = 0.0
    left, right = np.concatenate((decay[:1], decay)), np.concatenate((decay, decay[-1:]))
    both = np.where(left * right > 0.0, 0.5 * (left + right), 0.0)
    doubt = np.minimum(np.abs(_share(left) - _share(right)) / 2.0, 0.5)
    doubt[0] = 0.25
    return np.asarray(_share(both) * amps * dt), np.asarray(doubt * np.abs(amps) * dt)


def _share(decay: Floats) -> Floats:
    """1 / (1 - e^-a) - 1 / a, a half at a = 0."""
    a = np.where(np.abs(decay) < 1e-4, 1e-4, decay)
    return np.asarray(1.0 / -np.expm1(-a) - 1.0 / a)


def _slope(values: Floats, t: Floats) -> Floats:
    """Slope in each window: the lesser of the two beside it, none where they differ in sign."""
    steps = np.diff(values) / np.diff(t)
    left, right = np.concatenate(([0.0], steps)), np.concatenate((steps, [0.0]))
    lesser = np.sign(left) * np.minimum(np.abs(left), np.abs(right))
    return np.asarray(np.where(left * right > 0.0, lesser, 0.0))
