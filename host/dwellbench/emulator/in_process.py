"""The firmware in this very process, in virtual time and without threads: `Controller.step()` over a simulated board."""

from __future__ import annotations

import json
from typing import Any

from dwellbench import assets
from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.link_fifo import LinkFifo
from dwellbench.emulator.loader import Firmware
from dwellbench.emulator.reference import bits
from dwellbench.emulator.world import CAUSE_POWER, NO_CONVERSION

_STOP = bits("inputs")["stop"]


class SimulatedBoard:
    """The seam's methods over an emulated box. Names and meanings are the firmware's (`dwellbox/board.py`)."""

    def __init__(self, box: EmulatedBox) -> None:
        self._box = box
        self._world = box.world
        self.pumps = 0
        self.feeds = 0
        self.conversions = [NO_CONVERSION, NO_CONVERSION]
        self.emulation: dict[str, Any] = box.emulation()
        # straight to where the bytes are: these are the calls of every period
        link: LinkFifo = box.link
        self.get = link.get
        self.room = link.room
        self.put = link.put
        self.now_ms = box.world.clock_ms

    def wait_period(self) -> None:
        """Advance the world by one period."""
        box = self._box
        zero, one = self.conversions
        self._world.period(box.outputs, box.supply_mv, self.pumps, self.feeds, zero, one)
        self.pumps = self.feeds = 0
        self.conversions[0] = self.conversions[1] = NO_CONVERSION

    def inputs(self) -> int:
        return self._world.inputs

    def convert(self, unit: int, channel: int, full_scale: int) -> None:
        self.conversions[unit] = channel * 2 + full_scale

    def code(self, unit: int) -> int:
        return self._world.codes[unit]

    def outputs(self, bits: int) -> None:
        self._box.outputs = bits

    def supply_mv(self, mv: int) -> None:
        self._box.supply_mv = mv

    def pump(self) -> None:
        self.pumps += 1

    def feed(self) -> None:
        self.feeds += 1

    def keep(self, name: str, data: bytes) -> None:
        self._box.keep(name, data)

    def kept(self, name: str) -> bytes | None:
        return self._box.flash.get(name)

    def scratch(self) -> int:
        return self._box.scratch

    def set_scratch(self, value: int) -> None:
        self._box.scratch = value

    def cause(self) -> int:
        return self._box.cause

    def unique_id(self) -> str:
        return self._world.unique_id

    def build(self) -> str:
        """The firmware's hash, which a loader leaves on a board."""
        return assets.build_hash()

    def wants_plain(self) -> bool:
        """`to_plain` acts at once, so no later start has to be asked."""
        return False

    def restart_plain(self) -> None:
        self._box.to_plain()


class InProcessBox(EmulatedBox):
    """The firmware's own files in CPython. What main.py does at boot is done here; a test holds the two together."""

    def start(self) -> None:
        """Build the controller anew, as after a reset: RAM is gone."""
        self.board = SimulatedBoard(self)
        if self.cause == CAUSE_POWER and self.board.inputs() & _STOP:
            self.to_plain()
            return
        firmware = Firmware(assets.device())
        reference = json.loads((assets.device() / "reference_box.json").read_text(encoding="utf-8"))
        controller = firmware.module("dwellbox.controller").Controller
        self.controller = controller(self.board, reference, self.board.build())
        self._step = self.controller.step
        self._wait = self.board.wait_period

    def step(self) -> None:
        """One turn of main.py's loop."""
        self._step()
        if self.plain:
            self.idle()  # its last step fed a watchdog that is no more
        else:
            self._wait()
