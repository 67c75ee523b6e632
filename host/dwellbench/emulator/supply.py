"""The high-voltage supply: follows its setting in straight lines, at most 10 V/ms; drifts; must be pumped
to stay on.

Its setting is filtered over one control period, so each new setting is reached in a straight line through
the period after it was given, and a staircase of settings is a ramp. On, it holds its voltage either way;
off, its output floats on 10 nF and a bleeder.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

from dwellbench.emulator.dice import Dice
from dwellbench.emulator.front_end import Errors
from dwellbench.emulator.reference import box

PERIOD_S = 5e-3
_NEAR_V = 1e-9


@dataclass
class SupplyFault:
    """What faults do to it."""

    by_V: float = 0.0  # above its setting
    stuck_V: float | None = None  # does not switch off, stays here
    dead: bool = False
    drift_V_per_s: float = 0.0
    always_enabled: bool = False


class Supply:
    """Setting to slope. `on` says whether it holds its output."""

    def __init__(self, errors: Errors, dice: Dice) -> None:
        self._gain, self._most_drift = 1.0 + errors.supply_error, errors.drift_V_per_s
        self._dice = dice
        self.on = False
        self.moving = True
        self.setting_mv = 0
        self._drift = 0.0  # V/s, changes once a second
        self._drifted = 0.0  # V so far
        self._since_us = 0
        self.fault = SupplyFault()

    def target_V(self, now_us: int) -> float:
        """Where it wants to be now."""
        if self.fault.stuck_V is not None:
            return self.fault.stuck_V
        if self.fault.dead:
            return 0.0
        offset = (
            self._drifted + self.drift_V_per_s * (now_us - self._since_us) * 1e-6 if self.setting_mv else 0.0
        )
        return max(0.0, self._gain * self.setting_mv * 1e-3 + offset + self.fault.by_V)

    @property
    def drift_V_per_s(self) -> float:
        """Slope when settled."""
        if self.fault.stuck_V is not None or self.fault.dead or not self.setting_mv:
            return 0.0
        return self._drift + self.fault.drift_V_per_s

    def slope(self, volts: float, now_us: int) -> tuple[float, float]:
        """Slope for the period that begins now at `volts`, V/s; and the voltage to begin from (the same,
        less rounding)."""
        target = self.target_V(now_us)
        change = target - volts
        if abs(change) < _NEAR_V:
            self.moving = False
            return self.drift_V_per_s, target
        limit = box().slew_V_per_s
        steep = change / PERIOD_S
        if abs(steep) > limit:
            return (limit if steep > 0.0 else -limit), volts
        return steep + self.drift_V_per_s, volts

    def wander(self, now_us: int) -> None:
        """Once a second: another slope of drift, never above the stated one, pulled back when it has gone
        far."""
        self._drifted += self.drift_V_per_s * (now_us - self._since_us) * 1e-6
        self._since_us = now_us
        limit = self._most_drift
        wanted = 0.9 * self._drift + self._dice.normal(0.2 * limit) - 0.002 * self._drifted
        self._drift = max(-limit, min(limit, wanted))
        self.moving = True

    def state(self) -> dict[str, Any]:
        """JSON-able."""
        return {
            "on": self.on,
            "moving": self.moving,
            "setting_mv": self.setting_mv,
            "drift": self._drift,
            "drifted": self._drifted,
            "since_us": self._since_us,
            "dice": self._dice.state,
            "fault": asdict(self.fault),
        }

    def load(self, kept: dict[str, Any]) -> None:
        """Take up what `state` gave."""
        self.on, self.moving = kept["on"], kept["moving"]
        self.setting_mv, self._since_us = kept["setting_mv"], kept["since_us"]
        self._drift, self._drifted = kept["drift"], kept["drifted"]
        self._dice.state = kept["dice"]
        self.fault = SupplyFault(**kept["fault"])
