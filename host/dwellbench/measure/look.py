"""What leaks at 20 V, from the box's first look: beside the leak at the test's voltage it shows one that
rises faster.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot

import numpy as np

from dwellbench.measure.trace import Trace

_LEAST_V = 5.0
_ROWS = 3
_CHARGING_MOST = 0.3  # of the current; a large part still charges when its look ends, and shows no leak there


@dataclass(frozen=True)
class LowLeak:
    """Conductance in siemens with its standard uncertainty, at `volts_V`. Fast absorption is still in it."""

    siemens: float
    u_S: float
    volts_V: float


def low_leak(trace: Trace, capacitance_F: float | None) -> LowLeak | None:
    """Read the last settled rows of the stage `look`; None when there are none, or the part still charged
    there.
    """
    steady = trace.rows("look") & trace.readable & ~trace.unsettled & (trace.v_part_V > _LEAST_V)
    rows = np.flatnonzero(steady)[-_ROWS:]
    if rows.size < _ROWS:
        return None
    across_V = float(np.mean(trace.across_V[rows]))
    slope = float(
        np.polynomial.polynomial.polyfit(trace.t_s[rows] - trace.t_s[rows[0]], trace.across_V[rows], 1)[1]
    )
    amps = float(np.mean(trace.i_shunt_A[rows]))
    charging_A = (capacitance_F or 0.0) * slope
    offset_A, spread_A = float(trace.u_offset_A[rows].max()), float(np.ptp(trace.i_shunt_A[rows])) / 2.0
    if abs(charging_A) > _CHARGING_MOST * abs(amps) + 3.0 * offset_A:
        return None
    return LowLeak(amps / across_V, hypot(hypot(offset_A, charging_A), spread_A) / across_V, across_V)
