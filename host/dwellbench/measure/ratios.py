"""Ratios of the trade: absorption ratio, polarisation index, recovery. Each is null where its times were not
reached.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot

import numpy as np

from dwellbench.measure.leakage import Leakage, read_leakage
from dwellbench.measure.reference import reference_box
from dwellbench.measure.settled import Settled
from dwellbench.measure.trace import Circuit, Trace
from dwellbench.quantity import COVERAGE_95, Quantity

_GRACE_S = 5.0  # one minute is 60 +/- 5 s (IEC 60384-1, 4.5.2)
_DRAINED_U = 0.05  # of what the divider drained: the capacitance and the divider of it
ABSORPTION_S = (30.0, 60.0)
POLARISATION_S = (60.0, 600.0)


def resistance_ratio(
    trace: Trace,
    circuit: Circuit,
    settled: Settled,
    capacitance_F: float | None,
    times_s: tuple[float, float],
    end_s: float,
) -> Quantity | None:
    """R(later) / R(earlier), voltage held throughout. The times count from the voltage being in.

    Absorption ratio: 60 s over 30 s (maintenance practice, from memory). Polarisation index: 10 min over 1
    min (IEEE 43).
    """
    readings = ratio_readings(trace, circuit, settled, capacitance_F, times_s, end_s)
    return ratio_of(readings)


def ratio_of(readings: tuple[Leakage, Leakage] | None) -> Quantity | None:
    """The ratio of two readings' resistances, later over earlier; the gains cancel."""
    if readings is None:
        return None
    early, late = readings
    ratio = (late.volts_V / late.total_A) / (early.volts_V / early.total_A)
    return Quantity.of(ratio, ratio * hypot(early.u_read_A / early.total_A, late.u_read_A / late.total_A))


def ratio_readings(
    trace: Trace,
    circuit: Circuit,
    settled: Settled,
    capacitance_F: float | None,
    times_s: tuple[float, float],
    end_s: float,
) -> tuple[Leakage, Leakage] | None:
    """The two readings of a ratio, earlier and later; None when one was not reached or does not stand out."""
    late_s = end_s if abs(end_s - times_s[1]) <= _GRACE_S else times_s[1]
    if late_s > end_s:
        return None
    early = read_leakage(trace, circuit, settled, capacitance_F, times_s[0])
    late = read_leakage(trace, circuit, settled, capacitance_F, late_s)
    if early is None or late is None or not (_stands_out(early) and _stands_out(late)):
        return None
    return early, late


def _stands_out(leakage: Leakage) -> bool:
    return leakage.total_A > 3.0 * leakage.u_read_A


@dataclass(frozen=True)
class Recovery:
    """The rebound in per cent of the charging voltage, the share of it that the divider drained, and the doubt of both."""

    percent: float
    drained: float
    u_zero: float
    u_drained: float

    @property
    def quantity(self) -> Quantity:
        """With its doubt; "below" when it does not stand out of that."""
        u = hypot(self.u_zero, self.u_drained)
        if self.percent > COVERAGE_95 * u:
            return Quantity.of(self.percent, u)
        return Quantity.below(max(self.percent, 0.0) + COVERAGE_95 * u)


def recovery_percent(
    trace: Trace, circuit: Circuit, capacitance_F: float | None, volts_V: float
) -> Quantity | None:
    """The recovery as a quantity; see `recovery`."""
    found = recovery(trace, circuit, capacitance_F, volts_V)
    return None if found is None else found.quantity


def recovery(trace: Trace, circuit: Circuit, capacitance_F: float | None, volts_V: float) -> Recovery | None:
    """100 x recovered voltage / charging voltage, with what the divider drained during the watching put back.

    q = C V + integral of V / divider: without the second term the divider makes a small part look free of
    absorption. The time of charging, of bleeding and of watching belong to the figure; compare only what was
    taken alike.
    """
    rows = np.flatnonzero(trace.rows("recovery") & ~trace.v_clipped)
    if rows.size < 3 or volts_V <= 0.0 or not capacitance_F or capacitance_F <= 0.0:
        return None
    volts, dt = trace.v_part_V[rows], trace.interval_s[rows]
    drained = np.cumsum(volts * dt) / (capacitance_F * circuit.divider_ohm)
    back = volts + drained
    peak = int(np.argmax(back))
    box = reference_box()
    u_zero_V = 0.5 * box.per_code_V(0) * box.divider_ratio
    # the zero of the voltage is drained along with it
    u_zero_V *= 1.0 + float(dt[: peak + 1].sum()) / (capacitance_F * circuit.divider_ohm)
    share = 100.0 / volts_V
    gone_V = float(drained[peak])
    return Recovery(share * float(back[peak]), share * gone_V, share * u_zero_V, share * _DRAINED_U * gone_V)
