"""Curve fitting against NIST/ITL Statistical Reference Datasets (nonlinear regression); certified values as published there.

Models met in this work: a charge curve (Misra1a, BoxBOD), a floor with two exponentials (MGH17), a power law (DanWood).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
import pytest

from dwellbench.measure.least_squares import Fit, least_squares

Model = Callable[[np.ndarray, np.ndarray], np.ndarray]


def fitted(model: Model, x: Sequence[float], y: Sequence[float], start: Sequence[float]) -> Fit:
    xs, ys = np.array(x), np.array(y)

    def residuals(b: np.ndarray) -> np.ndarray:
        with np.errstate(all="ignore"):
            return np.nan_to_num(model(b, xs) - ys, nan=1e60, posinf=1e60, neginf=-1e60)

    found = least_squares(residuals, np.array(start))
    assert found is not None
    return found


def agrees(
    found: Fit, certified: Sequence[float], deviations: Sequence[float], squares: float, digits: float
) -> None:
    assert found.parameters == pytest.approx(certified, rel=10.0**-digits)
    assert [found.scatter * np.sqrt(found.covariance[k, k]) for k in range(len(certified))] == pytest.approx(
        deviations, rel=1e-5
    )
    assert found.chi2 == pytest.approx(squares, rel=1e-9)


MISRA_X = [77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0]
MISRA_Y = [10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78]


@pytest.mark.parametrize("start", [(500.0, 1e-4), (250.0, 5e-4)])
def test_misra1a(start: tuple[float, float]) -> None:
    """NIST StRD Misra1a, lower difficulty: y = b1 (1 - exp(-b2 x)), both published starts."""
    found = fitted(lambda b, x: b[0] * (1.0 - np.exp(-b[1] * x)), MISRA_X, MISRA_Y, start)
    agrees(found, (238.94212918, 5.5015643181e-4), (2.7070075241, 7.2668688436e-6), 0.12455138894, 9)
    assert found.freedom == 12
    assert found.scatter == pytest.approx(0.10187876330, rel=1e-9)


def test_boxbod() -> None:
    """NIST StRD BoxBOD, higher difficulty: the same model with six points; the nearer published start."""
    found = fitted(
        lambda b, x: b[0] * (1.0 - np.exp(-b[1] * x)),
        [1, 2, 3, 5, 7, 10],
        [109, 149, 149, 191, 213, 224],
        (100, 0.75),
    )
    agrees(found, (213.80940889, 0.54723748542), (12.354515176, 0.10455993237), 1168.0088766, 8)


@pytest.mark.parametrize("start", [(1.0, 5.0), (0.7, 4.0)])
def test_danwood(start: tuple[float, float]) -> None:
    """NIST StRD DanWood, lower difficulty: y = b1 x^b2, both published starts."""
    x, y = [1.309, 1.471, 1.490, 1.565, 1.611, 1.680], [2.138, 3.421, 3.597, 4.340, 4.882, 5.660]
    found = fitted(lambda b, x: b[0] * x ** b[1], x, y, start)
    agrees(found, (0.76886226176, 3.8604055871), (0.018281973860, 0.051726610913), 4.3173084083e-3, 9)


MGH17_Y = [
    *(0.844, 0.908, 0.932, 0.936, 0.925, 0.908, 0.881, 0.850, 0.818, 0.784, 0.751),
    *(0.718, 0.685, 0.658, 0.628, 0.603, 0.580, 0.558, 0.538, 0.522, 0.506, 0.490),
    *(0.478, 0.467, 0.457, 0.448, 0.438, 0.431, 0.424, 0.420, 0.414, 0.411, 0.406),
]


def test_mgh17() -> None:
    """NIST StRD MGH17, average difficulty: a floor and two exponentials; the nearer published start."""
    found = fitted(
        lambda b, x: b[0] + b[1] * np.exp(-x * b[3]) + b[2] * np.exp(-x * b[4]),
        [10.0 * k for k in range(33)],
        MGH17_Y,
        (0.5, 1.5, -1.0, 0.01, 0.02),
    )
    certified = (0.37541005211, 1.9358469127, -1.4646871366, 0.012867534640, 0.022122699662)
    deviations = (0.0020723153551, 0.22031669222, 0.22175707739, 4.4861358114e-4, 8.9471996575e-4)
    agrees(found, certified, deviations, 5.4648946975e-5, 7)
