"""The weighted line against scipy and against JCGM 100:2008, H.3."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import curve_fit

from dwellbench.measure.straight_line import weighted_line


def test_the_same_line_and_covariance_as_scipy() -> None:
    x, y, u = (
        np.array([60.0, 200.0, 300.0, 600.0]),
        np.array([60.1, 199.8, 300.6, 599.7]),
        np.array([0.5, 0.3, 0.9, 0.6]),
    )
    best, covariance = curve_fit(lambda t, a, b: a + b * t, x, y, p0=(0.0, 1.0), sigma=u, absolute_sigma=True)
    line = weighted_line(x, y, u)
    wider = max(line.scatter, 1.0)
    assert (line.at, line.slope) == pytest.approx(tuple(best), rel=1e-6)
    assert line.u_at == pytest.approx(wider * covariance[0, 0] ** 0.5, rel=1e-3)
    assert line.u_slope == pytest.approx(wider * covariance[1, 1] ** 0.5, rel=1e-3)
    assert line.r * line.u_at * line.u_slope == pytest.approx(wider**2 * covariance[0, 1], rel=1e-3)


def test_thermometer_example() -> None:
    """JCGM 100:2008, H.3, table H.6: y1 = -0.1712(29), y2 = 0.00218(67), r = -0.930, s = 0.0035."""
    t = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
    b = np.array([-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160])
    s = 0.0035
    line = weighted_line(t - 20.0, b, [s / 10.0] * 11)  # so small that the scatter rules, as it does there
    assert (round(line.at, 4), round(line.slope, 5)) == (-0.1712, 0.00218)
    assert (round(line.u_at, 4), round(line.u_slope, 5), round(line.r, 3)) == (0.0029, 0.00067, -0.930)
    assert round(line.scatter * s / 10.0, 4) == s
