"""The weighted line: its numbers, its covariance, and what it refuses."""

from __future__ import annotations

import numpy as np
import pytest

from dwellbench.measure.straight_line import weighted_line


def test_the_covariance_is_that_of_many_repetitions() -> None:
    chance = np.random.default_rng(7)
    x, u = np.array([1.0, 2.0, 5.0, 9.0]), np.array([0.1, 0.3, 0.2, 0.4])
    fits = [weighted_line(x, 3.0 + 2.0 * x + chance.normal(0.0, u), u) for _ in range(4000)]
    at, slope, root = (np.array([getattr(fit, name) for fit in fits]) for name in ("at", "slope", "root"))
    plain = weighted_line(x, 3.0 + 2.0 * x, u)
    assert np.std(at) == pytest.approx(plain.u_at, rel=0.05)
    assert np.std(slope) == pytest.approx(plain.u_slope, rel=0.05)
    assert np.std(root) == pytest.approx(plain.u_root, rel=0.05)
    assert np.corrcoef(at, slope)[0, 1] == pytest.approx(plain.r, abs=0.03)


def test_points_that_scatter_by_more_than_stated_widen_it() -> None:
    x = [0.0, 1.0, 2.0, 3.0]
    tight, loose = (weighted_line(x, [0.0, 1.0 + d, 2.0 - d, 3.0], [0.1] * 4) for d in (0.0, 0.5))
    assert loose.scatter > 3.0
    assert loose.u_slope == pytest.approx(loose.scatter * tight.u_slope)


@pytest.mark.parametrize(("x", "u"), [([1.0], [1.0]), ([1.0, 1.0], [1.0, 1.0]), ([1.0, 2.0], [1.0, 0.0])])
def test_what_makes_no_line_is_refused(x: list[float], u: list[float]) -> None:
    with pytest.raises(ValueError, match="two points"):
        weighted_line(x, x, u)
