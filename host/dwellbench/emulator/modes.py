"""Eigenvalues of a small symmetric matrix, and the few functions of them that exact steps need.

A network of resistors and capacitors, C dx/dt = -G x + b, has a symmetric C^-1/2 G C^-1/2, so it falls
apart into modes that each decay alone. Cyclic Jacobi rotations are used because they keep small
eigenvalues accurate to their own last digits beside huge ones, when the matrix is graded (J. Demmel, K.
Veselic, "Jacobi's method is more accurate than QR", 1992): here 56 ns of a shunt stand beside years of a
good part's leakage. Plain arithmetic, so every machine gets the same digits.
"""

from __future__ import annotations

from math import exp, expm1, sqrt

Matrix = list[list[float]]

_SWEEPS = 40
_EPS = 1e-16


def _rotation(app: float, aqq: float, apq: float) -> tuple[float, float, float]:
    """Cosine, sine and tangent of the rotation that makes apq zero."""
    theta = (aqq - app) / (2.0 * apq)
    t = (1.0 if theta >= 0.0 else -1.0) / (abs(theta) + sqrt(theta * theta + 1.0))
    c = 1.0 / sqrt(t * t + 1.0)
    return c, t * c, t


def _rotate(a: Matrix, v: Matrix, p: int, q: int) -> None:
    apq = a[p][q]
    c, s, t = _rotation(a[p][p], a[q][q], apq)
    a[p][p] -= t * apq
    a[q][q] += t * apq
    a[p][q] = a[q][p] = 0.0
    for k in range(len(a)):
        if k != p and k != q:
            akp, akq = a[k][p], a[k][q]
            a[k][p] = a[p][k] = c * akp - s * akq
            a[k][q] = a[q][k] = s * akp + c * akq
    for row in v:
        vp, vq = row[p], row[q]
        row[p] = c * vp - s * vq
        row[q] = s * vp + c * vq


def eigen_symmetric(matrix: Matrix) -> tuple[list[float], Matrix]:
    """Eigenvalues and, in the columns, eigenvectors of a symmetric positive definite matrix."""
    n = len(matrix)
    a = [row[:] for row in matrix]
    v = [[1.0 if i == j else 0.0 for j in range(n)] for i in range(n)]
    for _ in range(_SWEEPS):
        turned = False
        for p in range(n - 1):
            for q in range(p + 1, n):
                if abs(a[p][q]) > _EPS * sqrt(abs(a[p][p] * a[q][q])):
                    _rotate(a, v, p, q)
                    turned = True
        if not turned:
            break
    return [a[i][i] for i in range(n)], v


def cholesky(matrix: Matrix) -> Matrix:
    """Lower L with L L^T = matrix (symmetric positive definite)."""
    n = len(matrix)
    low = [[0.0] * n for _ in range(n)]
    for i in range(n):
        for j in range(i + 1):
            rest = matrix[i][j] - sum(low[i][k] * low[j][k] for k in range(j))
            low[i][j] = sqrt(rest) if i == j else rest / low[j][j]
    return low


def solve_lower(low: Matrix, b: list[float]) -> list[float]:
    """x of L x = b."""
    x: list[float] = []
    for i, row in enumerate(low):
        x.append((b[i] - sum(row[k] * x[k] for k in range(i))) / row[i])
    return x


def solve_upper(low: Matrix, b: list[float]) -> list[float]:
    """x of L^T x = b."""
    n = len(b)
    x = [0.0] * n
    for i in reversed(range(n)):
        x[i] = (b[i] - sum(low[k][i] * x[k] for k in range(i + 1, n))) / low[i][i]
    return x


def decay(rate: float, time: float) -> float:
    """exp(-rate time)."""
    return exp(-rate * time)


def decay_integral(rate: float, time: float) -> float:
    """Integral of exp(-rate t) from 0 to `time`, seconds."""
    x = rate * time
    return time * (-expm1(-x) / x) if x > 1e-12 else time


def decay_double(rate: float, time: float) -> float:
    """Integral from 0 to `time` of `decay_integral`: (time - decay_integral)/rate, seconds squared."""
    x = rate * time
    if x < 1e-2:  # the difference would cancel; four terms are below 1e-12 of it
        return time * time * (0.5 - x / 6.0 + x * x / 24.0 - x * x * x / 120.0 + x**4 / 720.0)
    return (time - decay_integral(rate, time)) / rate
