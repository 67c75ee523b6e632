"""All that one trace says of the part, each figure with its doubt: the estimators in their order, put
together.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, inf

import numpy as np

from dwellbench.measure.charge import Leaks, Stretch, charge_balance, low_volts, stretch_of
from dwellbench.measure.curve import Curve, fit_curve
from dwellbench.measure.estimate import Estimate
from dwellbench.measure.events import Events, events
from dwellbench.measure.leakage import Leakage, dwell_begin_s, read_leakage
from dwellbench.measure.look import LowLeak, low_leak
from dwellbench.measure.ratios import (
    ABSORPTION_S,
    POLARISATION_S,
    Recovery,
    ratio_of,
    ratio_readings,
    recovery,
)
from dwellbench.measure.settled import Settled, settled
from dwellbench.measure.trace import Circuit, Trace, circuit_of
from dwellbench.quantity import COVERAGE_95, Quantity

_APART = 0.005  # relative difference of the two capacitances that is worth a finding
_APART_U = 2.5
_POOR_FIT = (
    5.0  # scatter above which the curve is not that of a plain capacitor, and its doubt no longer statistical
)

# Share of the capacitance that is absorbed in each decade of time, typical values from memory: what the
# charge balance counts as capacitance although it is not there at 1 kHz.
ABSORBED_SHARE = {
    "polypropylene": 0.00015,
    "polystyrene": 0.00015,
    "polyester": 0.0008,
    "polycarbonate": 0.0008,
    "film": 0.0008,
    "mica": 0.002,
    "glass": 0.002,
    "ceramic_1": 0.002,
    "paper": 0.01,
    "ceramic_2": 0.01,
    "ceramic": 0.01,
    "tantalum": 0.015,
    "electrolytic": 0.02,
    "vacuum": 0.0,
}
_ABSORBED_UNKNOWN = 0.005
_LOOK_U = 0.05  # the box reckons its look with nominal scales, in whole numbers
CLASS_II = ("ceramic_2", "ceramic")
_ABSORBED_DECADES = 2.0


@dataclass(frozen=True)
class Estimates:
    """SI units; None where the trace does not say it."""

    circuit: Circuit
    settled: Settled
    stretch: Stretch | None
    balance: Estimate | None
    curve: Curve | None
    capacitance: Estimate | None
    apart: float | None  # relative difference of curve and balance, when it is a finding
    leakage: Leakage | None
    low_leak: LowLeak | None
    events: Events
    dwell_s: float | None
    absorption_ratio: Quantity | None
    polarisation_index: Quantity | None
    recovery_percent: Quantity | None
    u_absorbed_F: float = 0.0  # of the capacitance's own doubt, the part that is absorption
    absorption_readings: tuple[Leakage, Leakage] | None = None
    polarisation_readings: tuple[Leakage, Leakage] | None = None
    recovery: Recovery | None = None

    @property
    def u_gain(self) -> float:
        """Relative standard uncertainty of a conductance from the box's two gains."""
        return hypot(self.circuit.u_gain_i, self.circuit.u_gain_v)

    def capacitance_F(self) -> Quantity | None:
        """The direct-current capacitance."""
        found = self.capacitance
        if found is None:
            return None
        if found.value <= COVERAGE_95 * found.u:
            return Quantity.below(max(found.value, 0.0) + COVERAGE_95 * found.u)
        return Quantity.of(found.value, found.u)

    def total_current_A(self) -> Quantity | None:
        """The conventional reading at the end of the dwell."""
        leak = self.leakage
        if leak is None:
            return None
        return Quantity.of(leak.total_A, hypot(leak.u_read_A, leak.total_A * self.circuit.u_gain_i))

    def leakage_A(self) -> Quantity | None:
        """Conduction alone: bounds from the interval that absorption leaves, widened by the doubt of the
        reading.
        """
        leak = self.leakage
        if leak is None:
            return None
        doubt = COVERAGE_95 * hypot(leak.u_through_A, leak.through_A * self.circuit.u_gain_i)
        low, high = leak.least_A - doubt, leak.through_A + doubt
        u = hypot(leak.u_conduction_A, leak.conduction_A * self.circuit.u_gain_i)
        if low <= 0.0 or leak.conduction_A <= COVERAGE_95 * u:
            return Quantity.below(max(high, doubt))
        return Quantity.between(leak.conduction_A, u, low, high)

    def insulation_ohm(self) -> Quantity | None:
        """Voltage on the part over the total current, less the fixture's share; "above" when nothing stands
        out.
        """
        leak = self.leakage
        if leak is None:
            return None
        through = leak.total_A - leak.fixture_A
        u = hypot(hypot(leak.u_read_A, leak.u_fixture_A), hypot(leak.charging_A, leak.u_charging_A))
        return _over(leak.volts_V, through, hypot(u, through * self.u_gain))

    def time_constant_s(self) -> Quantity | None:
        """R x C; the box's gains cancel in it."""
        leak, found = self.leakage, self.capacitance
        if leak is None or found is None or found.value <= 0.0:
            return None
        through = leak.total_A - leak.fixture_A
        u = hypot(hypot(leak.u_read_A, leak.u_fixture_A), hypot(leak.charging_A, leak.u_charging_A))
        return _over(leak.volts_V * found.value, through, hypot(u, through * found.u_own / found.value))


def _over(numerator: float, amps: float, u_A: float) -> Quantity:
    """numerator / current with bounds from the current's own: never negative, never infinite."""
    most = max(amps, 0.0) + COVERAGE_95 * u_A
    least = amps - COVERAGE_95 * u_A
    if least <= 0.0:
        return Quantity.above(numerator / most)
    value = numerator / amps
    return Quantity.between(value, value * u_A / amps, numerator / most, numerator / least)


def estimate(trace: Trace, expect_F: float | None = None, dielectric: str | None = None) -> Estimates:
    """Measure one trace. `expect_F` is the marked capacitance, a first guess for settling times only;
    `dielectric` says how much absorption the capacitance may hold.
    """
    circuit = circuit_of(trace)
    stretch = stretch_of(trace)
    first = charge_balance(trace, circuit, stretch)
    guess_F = first.value if first is not None and first.value > 0.0 else expect_F
    mask = settled(trace, circuit, guess_F)
    leak = read_leakage(trace, circuit, mask, guess_F)
    low = low_leak(trace, guess_F)
    leaks = _leaks(leak, low)
    balance = charge_balance(trace, circuit, stretch, leaks)
    curve = fit_curve(trace, circuit, stretch, balance.value if balance else None)
    combined, apart = combine(balance, curve, _APART + 2.0 * _absorbed(dielectric))
    if dielectric in CLASS_II:
        combined = _at_low_volts(trace, circuit, stretch, leaks) or combined
    end_s = _dwell_s(trace)
    value_F = combined.value if combined is not None else None
    volts_V = leak.volts_V if leak is not None else 0.0
    early, late = (
        ratio_readings(trace, circuit, mask, value_F, times_s, end_s or 0.0)
        for times_s in (ABSORPTION_S, POLARISATION_S)
    )
    rebound = recovery(trace, circuit, value_F, volts_V)
    return Estimates(
        circuit=circuit,
        settled=mask,
        stretch=stretch,
        balance=balance,
        curve=curve,
        capacitance=_with_absorption(combined, dielectric),
        apart=apart,
        leakage=leak,
        low_leak=low,
        events=events(trace, mask),
        dwell_s=end_s,
        absorption_ratio=ratio_of(early),
        polarisation_index=ratio_of(late),
        recovery_percent=None if rebound is None else rebound.quantity,
        u_absorbed_F=abs(value_F or 0.0) * _absorbed(dielectric),
        absorption_readings=early,
        polarisation_readings=late,
        recovery=rebound,
    )


def _leaks(leak: Leakage | None, low: LowLeak | None) -> Leaks:
    """What is known of the leak beside the charging: at the look, and at the end of the dwell."""
    end_S = leak.through_A / leak.volts_V if leak is not None and leak.volts_V > 1.0 else None
    return Leaks(None if low is None else low.siemens, end_S)


def _dwell_s(trace: Trace) -> float | None:
    begin_s = dwell_begin_s(trace)
    return None if begin_s is None else round(float(trace.t_s[trace.rows("dwell")][-1]) - begin_s, 6)


def combine(
    balance: Estimate | None, curve: Curve | None, alike: float = _APART
) -> tuple[Estimate | None, float | None]:
    """Weigh the two capacitances by their own doubts. When they disagree the balance stands, with the
    difference as doubt: a disagreement is a finding, not an average. Returns (estimate, relative difference
    or None).
    """
    if balance is None or curve is None or curve.scatter > _POOR_FIT or balance.value <= 0.0:
        return balance, None
    other = curve.capacitance
    apart = (other.value - balance.value) / balance.value
    u_apart = hypot(balance.u_own, other.u_own) / balance.value
    if abs(apart) > max(alike, _APART_U * u_apart):
        return Estimate(
            balance.value, hypot(balance.u_own, abs(apart) * balance.value / 2.0), balance.u_shared
        ), apart
    weights = np.array([_weight(balance.u_own), _weight(other.u_own)])
    value = float(weights @ np.array([balance.value, other.value]) / weights.sum())
    return Estimate(value, float(1.0 / np.sqrt(weights.sum())), balance.u_shared, balance.rows), None


def _at_low_volts(trace: Trace, circuit: Circuit, stretch: Stretch | None, leaks: Leaks) -> Estimate | None:
    """Class II ceramic at 15 to 55 V: from that part of a ramp, else the box's own look at 20 V."""
    found = charge_balance(trace, circuit, low_volts(trace, stretch), leaks)
    if found is not None:
        return found
    look_pF = trace.number("look_pf")
    return Estimate(look_pF * 1e-12, look_pF * 1e-12 * _LOOK_U) if look_pF else None


def _weight(u: float) -> float:
    return 1.0 / u**2 if u > 0.0 else inf


def _with_absorption(found: Estimate | None, dielectric: str | None) -> Estimate | None:
    """The doubt of a direct-current capacitance as that of the part: how much of the charge was absorbed is
    not known.
    """
    if found is None:
        return None
    return Estimate(
        found.value, hypot(found.u_own, abs(found.value) * _absorbed(dielectric)), found.u_shared, found.rows
    )


def _absorbed(dielectric: str | None) -> float:
    """The share of a direct-current capacitance that may be absorption."""
    return ABSORBED_SHARE.get(dielectric or "", _ABSORBED_UNKNOWN) * _ABSORBED_DECADES
