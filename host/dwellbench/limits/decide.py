"""The decision rule: how probable it is that the part conforms, given what is known, and what verdict that
gives.

JCGM 106:2012, 7: with a best estimate y and standard uncertainty u (normal), the probability of conforming is
Phi((upper - y) / u) - Phi((lower - y) / u), a bound that is not there counting as infinite. Fit when it is at
least `accept`, unfit when at most `reject`, else undecided.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import erfc, sqrt

from dwellbench.errors import UsageError

FIT, UNFIT, UNDECIDED = "fit", "unfit", "undecided"
VERDICTS = (FIT, UNFIT, UNDECIDED)


def phi(z: float) -> float:
    """Distribution function of the standard normal."""
    return 0.5 * erfc(-z / sqrt(2.0))


def conformity(y: float, u: float, lower: float | None = None, upper: float | None = None) -> float:
    """Probability that the quantity lies between `lower` and `upper`; with u = 0 it is 0 or 1."""
    if lower is None and upper is None:
        raise ValueError("a limit has at least one side")
    if u < 0.0:
        raise ValueError("an uncertainty is not negative")
    if u == 0.0:
        return float((lower is None or y >= lower) and (upper is None or y <= upper))
    above = 1.0 if upper is None else phi((upper - y) / u)
    below = 0.0 if lower is None else phi((lower - y) / u)
    return min(max(above - below, 0.0), 1.0)


@dataclass(frozen=True)
class Thresholds:
    """Probabilities of conforming from which on a part is fit, and down to which it is unfit."""

    accept: float = 0.95
    reject: float = 0.05

    def __post_init__(self) -> None:
        """Refuse thresholds that would leave no room for doubt or turn the rule round."""
        if not 0.0 < self.reject < self.accept < 1.0:
            raise UsageError(
                f"Thresholds of {self.accept:g} to accept and {self.reject:g} to reject cannot be used.",
                remedy="Choose 0 < reject < accept < 1; usual are 0.95 and 0.05.",
            )

    def verdict(self, p_conform: float) -> str:
        """`fit`, `unfit` or `undecided`."""
        if p_conform >= self.accept:
            return FIT
        return UNFIT if p_conform <= self.reject else UNDECIDED


def guard_band(u: float, accept: float) -> float:
    """How far inside a one-sided limit a reading must lie to be accepted: w = z u (JCGM 106, 8.3). Units of
    `u`.
    """
    low, high = -10.0, 10.0
    for _ in range(80):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if phi(middle) < accept else (low, middle)
    return high * u
