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
    with np.errstate(all="ignore"):  # a search may look where the model overflows; such places are not taken
        return _search(residuals, np.asarray(start, dtype=float), scale, still, most_steps)


def _search(
    residuals: Residuals, parameters: Floats, scale: Floats | None, still: float, most_steps: int
) -> Fit | None:
    size = np.abs(parameters) if scale is None else np.asarray(scale, dtype=float)
    now, damp = residuals(parameters), _DAMP_FIRST
    for steps in range(1, most_steps + 1):
        better = _better(residuals, parameters, now, size, damp)
        if better is None:
            return _done(residuals, parameters, size, float(now @ now), steps)
        step, now, damp = better
        parameters = parameters + step
        if np.all(np.abs(step) <= still * np.maximum(np.abs(parameters), size)):
            return _done(residuals, parameters, size, float(now @ now), steps)
    return None


def _better(
    residuals: Residuals, parameters: Floats, now: Floats, size: Floats, damp: float
) -> tuple[Floats, Floats, float] | None:
    """A step that does not make the sum of squares larger: (step, residuals there, damping to go on with); None: there is
    none, however short."""
    slopes = _slopes(residuals, parameters, size)
    normal, pull = slopes.T @ slopes, slopes.T @ now
    weight = np.diag(normal).copy()
    weight[~(weight > 0.0)] = 1.0
    while damp < _DAMP_MOST and np.isfinite(normal).all():
        step = np.linalg.solve(normal + damp * np.diag(weight), -pull)
        there = residuals(parameters + step)
        if float(there @ there) <= float(now @ now):
            return np.asarray(step, dtype=np.float64), there, max(damp / 9.0, 1e-15)
        damp *= 8.0
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
