"""An estimate: a value with the doubt of its own and the doubt it shares with every other estimate of the
same box.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot


@dataclass(frozen=True)
class Estimate:
    """`u_own` is independent of other estimates, `u_shared` comes from gains in common. SI units."""

    value: float
    u_own: float
    u_shared: float = 0.0
    rows: int = 0

    @property
    def u(self) -> float:
        """Standard uncertainty, both together."""
        return hypot(self.u_own, self.u_shared)
