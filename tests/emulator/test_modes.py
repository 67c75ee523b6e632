"""Eigenvalues with their own last digits, and functions of them that do not cancel."""

from __future__ import annotations

from math import exp

import numpy as np
import pytest

from dwellbench.emulator.modes import (
    cholesky,
    decay,
    decay_double,
    decay_integral,
    eigen_symmetric,
    solve_lower,
    solve_upper,
)


def random_spd(n: int, seed: int) -> np.ndarray:
    a = np.random.default_rng(seed).normal(size=(n, n))
    return a @ a.T + 0.1 * np.eye(n)


@pytest.mark.parametrize("n", [1, 2, 5, 10])
def test_eigenvalues_and_vectors_rebuild_the_matrix(n):
    a = random_spd(n, n)
    values, vectors = eigen_symmetric(a.tolist())
    v = np.array(vectors)
    assert np.allclose(v @ np.diag(values) @ v.T, a, rtol=1e-12, atol=1e-12)
    assert np.allclose(v.T @ v, np.eye(n), atol=1e-13)
    assert sorted(values) == pytest.approx(sorted(np.linalg.eigvalsh(a)), rel=1e-11)


def test_small_eigenvalues_keep_their_digits_beside_huge_ones():
    # D A D, A well conditioned, D graded over eight decades: the least eigenvalue is known from the inverse
    core = np.array([[2.0, 0.5, 0.3], [0.5, 1.0, 0.2], [0.3, 0.2, 1.5]])
    d = np.diag([1e4, 1.0, 1e-4])
    values, _ = eigen_symmetric((d @ core @ d).tolist())
    inverse = np.diag([1e-4, 1.0, 1e4]) @ np.linalg.inv(core) @ np.diag([1e-4, 1.0, 1e4])
    assert min(values) == pytest.approx(1.0 / np.linalg.eigvalsh(inverse).max(), rel=1e-13)


def test_triangular_solves_undo_the_factor():
    a = random_spd(4, 9)
    low = cholesky(a.tolist())
    b = [1.0, -2.0, 0.5, 3.0]
    assert np.allclose(np.array(low) @ np.array(low).T, a)
    assert np.allclose(a @ solve_upper(low, solve_lower(low, b)), b)


@pytest.mark.parametrize("rate", [0.0, 1e-9, 1e-3, 1.0, 1.9, 2.1, 200.0, 1e9])
def test_integrals_of_decay(rate):
    time = 5e-3
    x = np.linspace(0.0, time, 20001)
    assert decay(rate, time) == exp(-rate * time)
    once = np.trapezoid(np.exp(-rate * x), x) if rate < 1e5 else 1.0 / rate
    assert decay_integral(rate, time) == pytest.approx(once, rel=1e-6)
    inner = np.array([decay_integral(rate, t) for t in x[1:]])
    twice = np.trapezoid(np.concatenate([[0.0], inner]), x)
    assert decay_double(rate, time) == pytest.approx(twice, rel=1e-4)


def test_the_double_integral_is_smooth_where_its_series_ends():
    edge = 1e-2 / 5e-3
    assert decay_double(edge * (1 - 1e-9), 5e-3) == pytest.approx(
        decay_double(edge * (1 + 1e-9), 5e-3), rel=1e-9
    )
