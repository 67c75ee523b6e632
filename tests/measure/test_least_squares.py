"""Lines and curves: what is found, what its doubt is, and when nothing is."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dwellbench.measure.least_squares import least_squares, line

CHANCE = np.random.default_rng(7)


@settings(max_examples=50, deadline=None, derandomize=True)
@given(st.floats(-1e3, 1e3), st.floats(-1e3, 1e3), st.floats(-50, 50))
def test_a_line_without_scatter_is_found(at: float, slope: float, x0: float) -> None:
    x = np.linspace(1.0, 9.0, 17)
    found = line(x, at + slope * (x - x0), x0)
    assert found.value(5.0) == pytest.approx(at + slope * (5.0 - x0), rel=1e-9, abs=1e-6)


def test_the_doubt_of_a_line_is_that_of_many_lines() -> None:
    x = np.arange(12.0)
    lines = [line(x, 3.0 + 0.5 * x + CHANCE.normal(0.0, 0.2, 12)) for _ in range(600)]
    for at in (0.0, 6.0, 20.0):
        seen = np.std([one.value(at) for one in lines])
        said = np.sqrt(np.mean([one.u(at) ** 2 for one in lines]))
        assert said == pytest.approx(seen, rel=0.12)


def test_two_points_are_no_line() -> None:
    with pytest.raises(ValueError, match="three points"):
        line(np.array([1.0, 2.0]), np.array([1.0, 2.0]))


def test_the_doubt_of_a_curve_is_that_of_many_curves() -> None:
    x = np.linspace(0.1, 5.0, 40)

    def once(noise: np.ndarray) -> tuple[float, float]:
        y = 3.0 * (1.0 - np.exp(-x / 1.3)) + noise
        fit = least_squares(lambda p: (p[0] * (1.0 - np.exp(-x / p[1])) - y) / 0.01, np.array([2.0, 1.0]))
        assert fit is not None
        return float(fit.parameters[1]), float(np.sqrt(fit.covariance[1, 1]))

    found = [once(CHANCE.normal(0.0, 0.01, 40)) for _ in range(150)]
    taus, doubts = zip(*found, strict=True)
    assert np.mean(doubts) == pytest.approx(np.std(taus), rel=0.2)
    assert np.mean(taus) == pytest.approx(1.3, rel=0.002)


def test_residuals_larger_than_assumed_widen_the_doubt() -> None:
    x = np.linspace(0.0, 1.0, 50)
    y = x + CHANCE.normal(0.0, 0.5, 50)
    fit = least_squares(lambda p: (p[0] * x - y) / 0.1, np.array([1.0]))
    assert fit is not None
    assert 3.5 < fit.scatter < 6.5
    assert fit.u(0) == pytest.approx(fit.scatter * np.sqrt(fit.covariance[0, 0]))


def test_where_no_minimum_is_found_there_is_none() -> None:
    falling = least_squares(
        lambda p: np.array([np.exp(-p[0]), np.exp(-2 * p[0])]), np.array([0.0]), most_steps=5
    )
    assert falling is None


def test_parameters_that_cannot_be_told_apart_have_no_doubt_to_trust() -> None:
    singular = least_squares(lambda p: np.array([p[0] + p[1] - 1.0, p[0] + p[1] - 2.0]), np.array([0.0, 0.0]))
    assert singular is None or not np.isfinite(singular.covariance).all() or singular.u(0) > 1e3
