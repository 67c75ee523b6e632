"""Bursts, drop-outs and jumps while the voltage stands: what a mean of a tenth of a second hides.

The least and the greatest reading of each row are kept for this. A row is an event when its spread stands far
out of the spread of its neighbours and is no mere slope, or when its mean jumps and comes back.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from dwellbench.measure.settled import Settled
from dwellbench.measure.trace import Bools, Trace

_WIDE = (
    3.0  # times the spread that nine rows in ten stay below: ripple beats with the sampling and is no event
)
_LEAST_CODES = 12.0
_LEAST_ROWS = 20
_AROUND = (
    4  # rows on either side whose median a row is compared with: a decay is straight over less than a second
)
_LOUD = 8.0
_RIPPLE = 0.15


@dataclass(frozen=True)
class Events:
    """How many separate events, when the first was (seconds of the trace), and the largest excursion in
    amperes.
    """

    count: int
    first_s: float
    largest_A: float


def events(trace: Trace, settled: Settled) -> Events:
    """Count events among the settled rows of the dwell, one shunt and range at a time."""
    marked = np.zeros(len(trace), dtype=bool)
    level = trace.shunt_ohm * 1e3 + trace.range_V
    for one in np.unique(level[settled.readings]):
        rows = settled.readings & (level == one)
        if int(rows.sum()) >= _LEAST_ROWS:
            marked |= _jumps(trace, rows) | _spread(trace, rows)
    if not marked.any():
        return Events(0, 0.0, 0.0)
    begins = np.flatnonzero(marked & ~np.concatenate(([False], marked[:-1])))
    usual = float(np.median(trace.i_shunt_A[settled.readings]))
    far = np.abs(trace.i_shunt_A[marked] - usual)
    for edge in (trace.i_min_A[marked], trace.i_max_A[marked]):
        far = np.fmax(far, np.abs(edge - usual))
    return Events(int(begins.size), float(trace.t_s[begins[0]]), float(far.max()))


def _jumps(trace: Trace, rows: Bools) -> Bools:
    """Rows whose mean stands far out of the median of the rows around it."""
    at = np.flatnonzero(rows)
    amps = trace.i_shunt_A[at]
    near = np.lib.stride_tricks.sliding_window_view(
        np.pad(amps, _AROUND, mode="reflect", reflect_type="odd"), 2 * _AROUND + 1
    )
    off = amps - np.median(near, axis=1)
    code_A = trace.range_V[at] / 32768.0 / trace.shunt_ohm[at]
    usual = 1.4826 * float(np.median(np.abs(off)))
    out = np.zeros(rows.size, dtype=bool)
    # one reading fewer in a row (a look at the reference) leaves some of the ripple in its mean
    ripple = np.nan_to_num(_RIPPLE * (trace.i_max_A[at] - trace.i_min_A[at]))
    out[at[np.abs(off) > np.maximum(_LOUD * usual, code_A) + ripple]] = True
    return out


def _spread(trace: Trace, rows: Bools) -> Bools:
    """Rows whose least and greatest reading lie far apart, compared with the other rows of the same level."""
    spread = trace.i_max_A - trace.i_min_A
    known = rows & np.isfinite(spread)
    if int(known.sum()) < _LEAST_ROWS:
        return np.zeros(rows.size, dtype=bool)
    code_A = trace.range_V / 32768.0 / trace.shunt_ohm
    usual = float(np.quantile(spread[known], 0.9))
    slope = np.abs(np.gradient(trace.i_shunt_A))
    return np.asarray(known & (spread > _WIDE * usual + 3.0 * slope) & (spread > _LEAST_CODES * code_A))
