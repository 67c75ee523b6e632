"""Fitting: straight lines with their doubt, and curves by damped Gauss-Newton steps."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import sqrt

import numpy as np

from dwellbench.measure.trace import Floats

Residuals = Callable[[Floats], Floats]

_MOST_STEPS = 400
_STILL = 1e-11  # relative change of the parameters below which a step changes nothing
_DAMP_FIRST, _DAMP_MOST = 1e-3, 1e12
_PROBE = 6e-6  # relative step of a central difference: third root of a double's resolution


@dataclass(frozen=True)
class Line:
    """y = at + slope (x - x0). `u_at`, `u_slope` from the scatter about the line, `r` their correlation, `s`
    the scatter.
    """

    x0: float
    at: float
    slope: float
    u_at: float
    u_slope: float
    r: float
    s: float

    def value(self, x: float) -> float:
        """The line at `x`."""
        return self.at + self.slope * (x - self.x0)

    def u(self, x: float) -> float:
        """Standard uncertainty of the line at `x` (JCGM 100, H.3.4)."""
        dx = x - self.x0
        return sqrt(
            max(self.u_at**2 + (dx * self.u_slope) ** 2 + 2.0 * dx * self.r * self.u_at * self.u_slope, 0.0)
        )


def line(x: Floats, y: Floats, x0: float = 0.0) -> Line:
    """Ordinary least squares of at least three points, shape (n,). Formulas of JCGM 100, H.3."""
    n = float(x.size)
    if n < 3:
        raise ValueError("a line with its doubt needs three points")
    dx = x - x0
    sx, sxx = float(dx.sum()), float(dx @ dx)
    d = n * sxx - sx**2
    at = (float(y.sum()) * sxx - float(dx @ y) * sx) / d
    slope = (n * float(dx @ y) - sx * float(y.sum())) / d
    s = sqrt(float(np.sum((y - at - slope * dx) ** 2)) / (n - 2.0))
    return Line(x0, at, slope, s * sqrt(sxx / d), s * sqrt(n / d), -sx / sqrt(n * sxx) if sxx else 0.0, s)


@dataclass(frozen=True)
class Fit:
    """Parameters (n,), their covariance (n, n) for residuals in units of their own noise, and the sum of
    squares.
    """

    parameters: Floats
    covariance: Floats
    chi2: float
    freedom: int
    steps: int

    @property
    def scatter(self) -> float:
        """Root of chi square over its degrees of freedom: 1 when the noise is as assumed."""
        return sqrt(self.chi2 / self.freedom) if self.freedom > 0 else 1.0

    def u(self, k: int) -> float:
        """Standard uncertainty of one parameter, widened when the residuals are larger than assumed."""
        return sqrt(max(float(self.covariance[k, k]), 0.0)) * max(self.scatter, 1.0)


def least_squares(
    residuals: Residuals,
    start: Floats,
    scale: Floats | None = None,
    *,
    still: float = _STILL,
    most_steps: int = _MOST_STEPS,
) -> Fit | None:
    """Minimise the sum of squares of `residuals(parameters)`, shape (m,), from `start`, shape (n,).

    `scale` is the usual size of each parameter, for the differences; where it is left out the start's.
    Residuals may be infinite where the parameters make no sense. Returns None when no minimum is found.
    """
    parameters = np.asarray(start, dtype=float)
    size = np.abs(parameters) if scale is None else np.asarray(scale, dtype=float)
    now = residuals(parameters)
    chi2 = float(now @ now)
    damp = _DAMP_FIRST
    for steps in range(1, most_steps + 1):
        slopes = _slopes(residuals, parameters, size)
        normal, pull = slopes.T @ slopes, slopes.T @ now
        weight = np.diag(normal).copy()
        weight[weight <= 0.0] = 1.0
        moved = False
        while damp < _DAMP_MOST:
            step = np.linalg.solve(normal + damp * np.diag(weight), -pull)
            there = residuals(parameters + step)
            after = float(there @ there)
            if np.isfinite(after) and after <= chi2:
                moved = True
                break
            damp *= 8.0
        if not moved:
            return _done(residuals, parameters, size, chi2, steps)
        rests = bool(np.all(np.abs(step) <= still * np.maximum(np.abs(parameters), size)))
        parameters, now, chi2 = parameters + step, there, after
        damp = max(damp / 9.0, 1e-15)
        if rests:
            return _done(residuals, parameters, size, chi2, steps)
    return None


def _done(residuals: Residuals, parameters: Floats, size: Floats, chi2: float, steps: int) -> Fit | None:
    slopes = _slopes(residuals, parameters, size)
    normal = slopes.T @ slopes
    weight = np.sqrt(np.maximum(np.diag(normal), 1e-300))
    try:
        covariance = np.linalg.inv(normal / np.outer(weight, weight)) / np.outer(weight, weight)
    except np.linalg.LinAlgError:
        return None
    return Fit(parameters, covariance, chi2, slopes.shape[0] - slopes.shape[1], steps)


def _slopes(residuals: Residuals, parameters: Floats, size: Floats) -> Floats:
    """Central differences, shape (m, n)."""
    columns = []
    for k in range(parameters.size):
        step = np.zeros(parameters.size)
        step[k] = _PROBE * max(abs(float(parameters[k])), float(size[k]), 1e-300)
        columns.append((residuals(parameters + step) - residuals(parameters - step)) / (2.0 * step[k]))
    return np.column_stack(columns)
