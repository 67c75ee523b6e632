"""A number with its doubt: value, standard uncertainty, and 95 % bounds, any of which may be unknown."""

from __future__ import annotations

import math
from dataclasses import dataclass

# Normal distribution, 95 % two-sided (JCGM 100, table G.1).
COVERAGE_95 = 1.959964


@dataclass(frozen=True)
class Quantity:
    """`value` and `u` may be None while a bound stands ("above x"). SI units; the name of the field says which."""

    value: float | None
    u: float | None
    low: float | None
    high: float | None

    @classmethod
    def of(cls, value: float, u: float, *, coverage: float = COVERAGE_95) -> Quantity:
        """Return value and standard uncertainty with symmetric bounds at `coverage` times u."""
        if not (math.isfinite(value) and math.isfinite(u) and u >= 0):
            raise ValueError("a quantity needs a finite value and a finite, non-negative uncertainty")
        return cls(value, u, value - coverage * u, value + coverage * u)

    @classmethod
    def between(cls, value: float, u: float, low: float, high: float) -> Quantity:
        """Return a value with bounds that need not be symmetric."""
        return cls(value, u, min(low, high), max(low, high))

    @classmethod
    def above(cls, low: float) -> Quantity:
        """Return "above `low`": all that can honestly be said."""
        return cls(None, None, low, None)

    @classmethod
    def below(cls, high: float) -> Quantity:
        """Return "below `high`"."""
        return cls(None, None, None, high)

    def as_json(self) -> dict[str, float | None]:
        """Return the interface's form."""
        return {"value": self.value, "u": self.u, "low": self.low, "high": self.high}

    @classmethod
    def from_json(cls, data: dict[str, float | None] | None) -> Quantity | None:
        """Return the quantity, or None for null."""
        if data is None:
            return None
        return cls(data.get("value"), data.get("u"), data.get("low"), data.get("high"))
