"""Which rows are readings of leakage: in the dwell, not clipped, and long enough after a change of shunt.

Behind a new shunt Rs the low node settles with (Rs + Rth) C: until seven of these are over a true leak reads
low, which would be a false accept, and what was left of the charge reads high.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from dwellbench.measure.trace import Bools, Circuit, Trace

SETTLE_TAUS = 7.0


@dataclass(frozen=True)
class Settled:
    """Masks over a trace's rows."""

    dwell: Bools
    readings: Bools
    settles_s: float  # how long the last change of shunt takes to settle, seconds; 0 without one


def settled(trace: Trace, circuit: Circuit, capacitance_F: float | None) -> Settled:
    """Find the dwell's rows that are readings. Without a capacitance only the trace's own marks and one
    window blank.
    """
    dwell = trace.rows("dwell")
    blank = trace.unsettled.copy()
    settles_s = 0.0
    stepped = np.diff(trace.shunt_ohm, prepend=trace.shunt_ohm[:1]) != 0.0
    for at in np.flatnonzero(stepped & trace.rows("charge", "dwell")):
        settles_s = SETTLE_TAUS * (float(trace.shunt_ohm[at]) + circuit.thevenin_ohm) * (capacitance_F or 0.0)
        begin_s = float(trace.t_s[at] - trace.interval_s[at])
        blank |= (np.arange(len(trace)) >= at) & (
            trace.t_s <= begin_s + settles_s + 1.001 * trace.interval_s[at]
        )
    return Settled(dwell, dwell & ~blank & trace.readable, settles_s)
