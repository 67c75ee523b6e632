"""A straight line through points of stated uncertainty, with the whole covariance of its two parameters.

Weighted least squares, y = at + slope x. With points of unknown but equal uncertainty JCGM 100, H.3 is the same line, its
doubt taken from the scatter; here the doubt comes from what is stated of the points, and is widened when they scatter by more.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import sqrt

import numpy as np


@dataclass(frozen=True)
class StraightLine:
    """`u_at`, `u_slope` and their correlation `r`; `scatter` is the root of chi square over its degrees of freedom."""

    at: float
    slope: float
    u_at: float
    u_slope: float
    r: float
    scatter: float
    points: int

    @property
    def root(self) -> float:
        """Where the line is nought."""
        return -self.at / self.slope

    @property
    def u_root(self) -> float:
        """Standard uncertainty of `root` (JCGM 100, equation 13)."""
        by_at, by_slope = -1.0 / self.slope, self.at / self.slope**2
        mixed = 2.0 * by_at * by_slope * self.r * self.u_at * self.u_slope
        return sqrt(max((by_at * self.u_at) ** 2 + (by_slope * self.u_slope) ** 2 + mixed, 0.0))


def weighted_line(x: Sequence[float], y: Sequence[float], u_y: Sequence[float]) -> StraightLine:
    """Fit at least two points at different `x`. Raises ValueError for fewer, or for a `u_y` that is not positive."""
    if len(x) < 2 or max(x) <= min(x) or min(u_y) <= 0.0:
        raise ValueError("a line needs two points that differ, each with its uncertainty")
    weight = 1.0 / np.square(np.asarray(u_y, dtype=float))
    xs, ys = np.asarray(x, dtype=float), np.asarray(y, dtype=float)
    whole = float(weight.sum())
    middle = float(weight @ xs) / whole
    spread = float(weight @ np.square(xs - middle))
    slope = float(weight @ ((xs - middle) * ys)) / spread
    mean = float(weight @ ys) / whole
    freedom = len(x) - 2
    chi2 = float(weight @ np.square(ys - mean - slope * (xs - middle)))
    scatter = sqrt(chi2 / freedom) if freedom else 1.0
    wider = max(scatter, 1.0)
    u_mean, u_slope = wider / sqrt(whole), wider / sqrt(spread)
    u_at = sqrt(u_mean**2 + (middle * u_slope) ** 2)
    return StraightLine(
        mean - slope * middle, slope, u_at, u_slope, -middle * u_slope / u_at, scatter, len(x)
    )
