"""An emulated box: the world, a controller's memory and link, and the controller itself in one of two interpreters.

`tick()` is one control period of 5 ms in virtual time. Nothing here reads a clock. What a board keeps through a reset (scratch)
and through a power cut (flash) is kept here; RAM is the controller's and goes with it.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

from dwellbench.emulator.link_fifo import LinkFifo
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.world import CAUSE_POWER, NO_CONVERSION, World

# A file written beside the old one and renamed over it erases two pages of flash, 45 ms each, and programs a few (general
# knowledge); the loop stands still meanwhile, with its outputs as they are.
FLASH_PERIODS = 20


class EmulatedBox:
    """Base of both: subclasses start, step and stop the controller."""

    def __init__(
        self, scenario: Scenario, seed: int | None = None, *, time_scale: float | None = None
    ) -> None:
        self.world = World(scenario, seed)
        self.link = LinkFifo()
        self.time_scale = time_scale  # virtual seconds a wall second; None: virtual time waits for the host
        self.flash: dict[str, bytes] = {}
        self.on_keep: Callable[[], None] | None = None  # after every write to flash
        self.scratch = 0
        self.cause = CAUSE_POWER
        self.plain = False  # in the plain interpreter: no controller, no watchdog
        self.outputs = 0
        self.supply_mv = 0
        self.resets = 0
        self._started = False
        if self.world.calibration is not None:
            self.flash["calibration"] = json.dumps(self.world.calibration, separators=(",", ":")).encode()

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
            self.idle()
            return
        if world.link_silent:
            self.link.drop()
        self.step()
        if world.link_silent:
            self.link.drop()  # nor what was put just now: a host that waits reads between the periods

    def idle(self) -> None:
        """A period in which nothing steps: outputs stay, nothing is pumped or fed."""
        self.world.period(self.outputs, self.supply_mv, 0, 0, NO_CONVERSION, NO_CONVERSION)

    @property
    def now_s(self) -> float:
        """Virtual seconds since power-up."""
        return self.world.now_us / 1e6

    def _restart(self, cause: int) -> None:
        """Pins, RAM and the link's buffers go; after a loss of power the scratch too."""
        if self._started:
            self.stop()
            self.resets += 1
        self._started = True
        self.cause = cause
        if cause == CAUSE_POWER:
            self.scratch = 0
        self.outputs = 0
        self.supply_mv = 0
        self.plain = False
        self.link.drop()
        self.start()

    def to_plain(self) -> None:
        """Into the plain interpreter with safe levels. A board gets there by a reset, the only thing that ends a watchdog."""
        self.outputs = 0
        self.supply_mv = 0
        self.plain = True
        self.world.ask_reset()
        self.world.take_reset()

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
        """Flash write: the loop stands still for as long as it takes, while the world goes on."""
        self.flash[name] = bytes(data)
        if name == "marker" and data == b"1":
            self.world.run_began()
        for _ in range(FLASH_PERIODS):
            self.idle()
        if self.on_keep is not None:
            self.on_keep()

    @property
    def in_run(self) -> bool:
        """Whether a run's marker stands in flash: it is under way, or did not end in clean rest."""
        return self.flash.get("marker") == b"1"

    def emulation(self) -> dict[str, Any]:
        """What hello says of the emulation."""
        return {"time_scale": "virtual" if self.time_scale is None else f"{self.time_scale:g}"}
