"""The lid: two switches of opposite sense that do not change together, and a bolt that needs power to let go.

Opening can only be stopped by the bolt; the world's operator looks at it, a `lid_open` fault does not.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass, field
from typing import Any

from dwellbench.emulator.dice import Dice
from dwellbench.emulator.faults import NEVER_US


@dataclass
class _Later:
    """Something mechanical on its way: `value` from `at_us` on."""

    value: bool
    goal: bool
    at_us: int = NEVER_US

    def send(self, goal: bool, at_us: int) -> None:
        if goal != self.goal:
            self.goal = goal
            self.at_us = at_us if goal != self.value else NEVER_US

    def arrive(self, now_us: int) -> None:
        if self.at_us <= now_us:
            self.value, self.at_us = self.goal, NEVER_US


@dataclass
class LidFault:
    """What faults do to it: a switch's contact stuck closed or open; the bolt not moving, or always in one
    place."""

    switch: dict[str, bool] = field(default_factory=dict)  # "a" or "b": says closed
    bolt_stays: bool = False
    bolt_at: bool | None = None


class Lid:
    """`is_open` the lid itself; `closed_a`, `closed_b` what each switch says; `bolt` True when in the
    locked position."""

    def __init__(self, bolt_ms: float, dice: Dice) -> None:
        self._bolt_us = round(bolt_ms * 1e3)
        self._lag_us = (round(dice.uniform(0.0, 4e3)), round(dice.uniform(4e3, 20e3)))
        self.is_open = False
        self._a, self._b = _Later(True, True), _Later(True, True)
        self._bolt = _Later(True, True)
        self._powered = False
        self.fault = LidFault()
        self.next_us = NEVER_US

    @property
    def closed_a(self) -> bool:
        """Switch A says closed."""
        return self.fault.switch.get("a", self._a.value)

    @property
    def closed_b(self) -> bool:
        """Switch B says closed."""
        return self.fault.switch.get("b", self._b.value)

    @property
    def wired(self) -> bool:
        """Both contacts closed in the wiring of supply and charge relay."""
        return self.closed_a and self.closed_b

    @property
    def bolt(self) -> bool:
        """True: locked."""
        return self._bolt.value if self.fault.bolt_at is None else self.fault.bolt_at

    def move(self, opened: bool, now_us: int) -> None:
        """Open or close the lid; the switches follow, one after the other."""
        if opened != self.is_open:
            self.is_open = opened
            self._a.send(not opened, now_us + self._lag_us[0])
            self._b.send(not opened, now_us + self._lag_us[1])
            self.power(self._powered, now_us)

    def power(self, released: bool, now_us: int) -> None:
        """Power on the release (already gated by the detector). Without it the spring closes the bolt, if
        the lid is shut."""
        self._powered = released
        if not self.fault.bolt_stays and (released or not self.is_open):
            self._bolt.send(not released, now_us + self._bolt_us)
        self._next()

    def tick(self, now_us: int) -> None:
        """Let arrive what is due."""
        for later in (self._a, self._b, self._bolt):
            later.arrive(now_us)
        self._next()

    def _next(self) -> None:
        self.next_us = min(self._a.at_us, self._b.at_us, self._bolt.at_us)

    def state(self) -> dict[str, Any]:
        """JSON-able."""
        rows = [[later.value, later.goal, later.at_us] for later in (self._a, self._b, self._bolt)]
        return {"open": self.is_open, "powered": self._powered, "later": rows, "fault": asdict(self.fault)}

    def load(self, kept: dict[str, Any]) -> None:
        """Take up what `state` gave."""
        self.is_open, self._powered = kept["open"], kept["powered"]
        self._a, self._b, self._bolt = (_Later(*row) for row in kept["later"])
        self.fault = LidFault(**kept["fault"])
        self._next()
