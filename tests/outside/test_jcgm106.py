"""The decision rule against JCGM 106:2012, and lines against JCGM 100:2008 (GUM), H.3."""

from __future__ import annotations

import numpy as np
import pytest

from dwellbench.limits.decide import Thresholds, conformity, guard_band, phi
from dwellbench.measure.least_squares import line


def test_two_sided_example() -> None:
    """JCGM 106, 7.4: y = 13.6, u = 1.8, limits 12.5 and 16.3 (inputs as worked on metrologyrules.com, 2022-03); prints 0.66."""
    p = conformity(13.6, 1.8, 12.5, 16.3)
    assert p == pytest.approx(0.66263, abs=5e-6)
    assert round(p, 2) == 0.66
    assert phi(1.5) == pytest.approx(0.933193, abs=5e-7)
    assert phi(-0.6111) == pytest.approx(0.270567, abs=1e-5)


def test_upper_limit_example() -> None:
    """JCGM 106, 7.3.3, example 1: a Zener diode, y = -5.47 V, u = 0.05 V, upper limit -5.40 V. Numbers from memory."""
    assert conformity(-5.47, 0.05, upper=-5.40) == pytest.approx(0.91924, abs=5e-6)


def test_lower_limit_example() -> None:
    """JCGM 106, 7.3.3, example 2: burst pressure, y = 509.7 kPa, u = 8.6 kPa, lower limit 490 kPa. Numbers from memory."""
    assert conformity(509.7, 8.6, lower=490.0) == pytest.approx(0.98901, abs=5e-6)


@pytest.mark.parametrize(
    ("accept", "z"),
    [(0.80, 0.8416), (0.90, 1.2816), (0.95, 1.6449), (0.975, 1.96), (0.99, 2.3263), (0.999, 3.0902)],
)
def test_guard_band(accept: float, z: float) -> None:
    """w = z u; quantiles of the standard normal, any table. A reading on the guarded limit has exactly that probability."""
    assert guard_band(0.5, accept) == pytest.approx(0.5 * z, abs=5e-5)
    assert conformity(10.0 - guard_band(0.5, accept), 0.5, upper=10.0) == pytest.approx(accept, abs=1e-9)


def test_simple_acceptance_at_the_limit_is_a_coin() -> None:
    """A reading on the limit is false in half the cases; with a guard of 2 u in 2.275 % (ILAC-G8:09/2019 says below 2.5 %)."""
    assert conformity(10.0, 0.3, upper=10.0) == pytest.approx(0.5)
    assert 1.0 - conformity(10.0 - 0.6, 0.3, upper=10.0) == pytest.approx(0.02275, abs=1e-5)
    assert Thresholds(0.975, 0.025).verdict(conformity(9.4, 0.3, upper=10.0)) == "fit"


# GUM H.3: thermometer calibration, readings t, corrections b (data as in public copies of the example).
T = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
B = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]


def test_gum_h3_thermometer() -> None:
    """Published: y1 = -0.1712(29), y2 = 0.00218(67), r = -0.930, s = 0.0035, b(30) = -0.1494(41)."""
    found = line(np.array(T), np.array(B), 20.0)
    assert found.at == pytest.approx(-0.17120379013135, abs=1e-12)
    assert found.slope == pytest.approx(0.00218269773988725, abs=1e-12)
    assert (round(found.at, 4), round(found.u_at, 4)) == (-0.1712, 0.0029)
    assert (round(found.slope, 5), round(found.u_slope, 5)) == (0.00218, 0.00067)
    assert round(found.r, 3) == -0.930
    assert round(found.s, 4) == 0.0035
    assert (round(found.value(30.0), 4), round(found.u(30.0), 4)) == (-0.1494, 0.0041)
