"""An emulated box: the world, a controller's memory and link, and the controller itself in one of two interpreters.

`tick()` is one control period of 5 ms in virtual time. Nothing here reads a clock. What a board keeps through a reset (scratch)
and through a power cut (flash) is kept here; RAM is the controller's and goes with it.
"""

from __future__ import annotations

import base64
from typing import Any

from dwellbench.emulator.link_fifo import LinkFifo
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.world import CAUSE_POWER, NO_CONVERSION, World


class EmulatedBox:
    """Base of both: subclasses start, step and stop the controller."""

    def __init__(self, scenario: Scenario, seed: int | None = None, *, time_scale: float | None = None) -> None:
        self.world = World(scenario, seed)
        self.link = LinkFifo()
        self.time_scale = time_scale  # virtual seconds a wall second; None: virtual time waits for the host
        self.flash: dict[str, bytes] = {}
        self.scratch = 0
        self.cause = CAUSE_POWER
        self.plain = False  # in the plain interpreter: no controller, no watchdog
        self.outputs = 0
        self.supply_mv = 0
        self.resets = 0
        self._started = False
        if self.world.calibration is not None:
            self.flash["calibration"] = _compact(self.world.calibration)

    # -- time

    def tick(self) -> None:
        """One period: the controller's step, then 5 ms of the world."""
        world = self.world
        cause = world.take_reset()
        if cause >= 0:
            self._restart(cause)
        elif not self._started:
            self._started = True
            self.start()
        if world.controller_hung or self.plain:
            world.period(self.outputs, self.supply_mv, 0, 0, NO_CONVERSION, NO_CONVERSION)
            return
        if world.link_silent:
            self.link.drop()
        self.step()

    @property
    def now_s(self) -> float:
        """Virtual seconds since power-up."""
        return self.world.now_us / 1e6

    def _restart(self, cause: int) -> None:
        self.stop()
        self.resets += 1
        self.cause = cause
        if cause == CAUSE_POWER:
            self.scratch = 0
        self.outputs = 0
        self.supply_mv = 0
        self.plain = False
        self.start()

    def to_plain(self) -> None:
        """Into the plain interpreter with safe levels."""
        self.outputs = 0
        self.supply_mv = 0
        self.plain = True

    # -- the controller, by subclasses

    def start(self) -> None:
        """Start the controller anew."""
        raise NotImplementedError

    def step(self) -> None:
        """Step it once and advance the world by one period."""
        raise NotImplementedError

    def stop(self) -> None:
        """End it."""

    # -- memory

    def keep(self, name: str, data: bytes) -> None:
        """Flash write."""
        self.flash[name] = bytes(data)
        if name == "marker" and data == b"1":
            self.world.run_began()

    def emulation(self) -> dict[str, Any]:
        """What hello says of the emulation."""
        return {"time_scale": "virtual" if self.time_scale is None else f"{self.time_scale:g}"}

    def snapshot(self) -> dict[str, Any]:
        """What lives on between two openings of the same box."""
        flash = {name: base64.b64encode(data).decode() for name, data in self.flash.items()}
        return {"flash": flash, "world": self.world.snapshot()}

    def restore(self, kept: dict[str, Any]) -> None:
        """Take up a snapshot: the box is switched on again where it was left."""
        self.flash = {name: base64.b64decode(data) for name, data in kept["flash"].items()}
        self.world.restore(kept["world"])


def _compact(value: dict[str, Any]) -> bytes:
    import json

    return json.dumps(value, separators=(",", ":")).encode()
