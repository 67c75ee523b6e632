"""The box with parts, operator and faults around it.

world.py steps it; here is what happens at the rarer moments, and the truth about it all.
"""

from __future__ import annotations

from copy import deepcopy
from dataclasses import asdict
from typing import Any

from dwellbench.emulator.faults import NEVER_US, PART_KINDS, FaultClock
from dwellbench.emulator.hardware import EMPTY, TICK_US, Hardware
from dwellbench.emulator.network import CHARGE_REST
from dwellbench.emulator.operator import Operator
from dwellbench.emulator.parts import Fitted
from dwellbench.emulator.reference import box
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.trouble import ACTS
from dwellbench.emulator.truth import Harm, Truth

PERIOD_US = 5000
_REACH_US = (
    100_000  # a hand moves at 2 m/s (ISO 13855, from memory), and the part lies 0.2 m behind the lid's edge
)
_DRIFT_TICKS = 10
_PLAIN = (
    # what changes and is plain data
    "now_us",
    "paths",
    "fixture_S",
    "divider_factor",
    "reference_factor",
    "thermistor_fixed_V",
    "detector_stuck",
    "silent",
    "stuck_code",
    "stop_pressed",
    "controller_hung",
    "link_silent",
    "powered",
    "clock_offset_ms",
    "celsius",
    "_warm_goal",
    "_warm_K_per_s",
    "part_index",
    "runs",
    "_run_open",
    "_danger_known",
    "_foreign_part",
    "_why",
    "_reach_us",
    "_tick_us",
    "_ticks",
    "_flaw_us",
)


class BenchModel(Hardware):
    """Everything of the world that is not the stepping of a period."""

    def __init__(self, scenario: Scenario, seed: int) -> None:
        super().__init__(scenario, seed)
        self.operator = Operator(scenario.operator)
        self.fault_clock = FaultClock(scenario.faults)
        self._fitted: dict[int, Fitted] = {}
        self.part_index = -1
        self.runs = 0
        self._run_open = False
        self.harms: list[Harm] = []
        self._danger_known, self._why, self._reach_us = False, "", 0
        self._foreign_part = (
            False  # the part came in after the lid was opened: its charge is not the box's doing
        )
        self._tick_us, self._ticks = TICK_US, 0
        self.next_us = 0
        self.fit(0)

    def supply_switched(self, on: bool) -> None:
        """The supply has just been enabled or lost its enable."""
        if on:
            self.supply.moving = True
            if not self._run_open:
                self.begin_run()
        else:
            self.circuit.set_slope(0.0)
        self.circuit.switch(self._contacts()._replace(supply_on=on))

    # -- time

    def find_next(self) -> None:
        """When something happens next that is not plain stepping."""
        due = self.relays.due
        self.next_us = min(
            self._tick_us,
            due[0].at_us if due else NEVER_US,
            self.lid.next_us,
            self.operator.next_us,
            self.fault_clock.next_us,
            self._flaw_us,
        )

    def tick(self, now: int) -> bool:
        """Do what is due at the beginning of a period; True about ten times a second."""
        if self.lid.next_us <= now:
            before = self.lid.bolt
            self.lid.tick(now)
            if before and not self.lid.bolt:
                self.operator.notice_bolt(now)
        for fault, on in self.fault_clock.changes(now) if self.fault_clock.next_us <= now else []:
            ACTS[fault.kind](self, fault, on)  # type: ignore[arg-type]
        if self.operator.next_us <= now:
            self.operator.tick(self, now)
        if self._flaw_us <= now:
            self._toggle_flaw(now)
        if self._tick_us > now:
            return False
        self._tick_us = now + TICK_US
        self._slow_changes(now)
        return True

    def _slow_changes(self, now: int) -> None:
        self._ticks += 1
        if self._ticks % _DRIFT_TICKS == 0:
            self.supply.wander(now)
        self._warm()
        late = self.part.spec.late_leak
        if late and abs(self.circuit.states()[2].plate_V) > late.above_V:
            self.part.stressed_s += TICK_US * 1e-6

    def _plan_flaw(self, now: int) -> None:
        flaw = self.part.spec.intermittent
        if flaw is None:
            self._flaw_us = NEVER_US
            return
        mean = flaw.for_s if self.part.flaw_on else flaw.every_s
        self._flaw_us = now + max(1000, round(self.chance.waiting(mean) * 1e6))

    def _toggle_flaw(self, now: int) -> None:
        self.part.flaw_on = not self.part.flaw_on
        self._plan_flaw(now)

    def begin_run(self) -> None:
        """A run begins now."""
        self.runs += 1
        self._run_open = True
        self.operator.notice_run()
        self.fault_clock.begin(self.runs, self.now_us)
        self.find_next()

    # -- what the operator does

    def bolt_is_open(self) -> bool:
        """The lid can be lifted."""
        return not self.lid.bolt

    def open_lid(self) -> None:
        """Lift the lid."""
        self.lid.move(True, self.now_us)
        self.lid_moved(True, "the lid was opened")

    def close_lid(self) -> None:
        """Shut the lid."""
        self.lid.move(False, self.now_us)
        self.lid_moved(False, "")

    def take_out(self) -> None:
        """Lift the part out, a shorting wire round its leads."""
        for fault in self.fault_clock.drop(PART_KINDS):
            ACTS[fault.kind](self, fault, False)  # type: ignore[arg-type]
        self._put(Fitted(EMPTY))

    def fit_next(self) -> None:
        """Fit the next part of the scenario; the last one stays the last."""
        self.fit(min(max(self._fitted, default=-1) + 1, len(self.scenario.parts) - 1))

    def fit(self, index: int) -> None:
        """Fit part `index` of the scenario."""
        if not self.scenario.parts:
            self._put(Fitted(EMPTY))
            return
        spec = self.scenario.parts[index]
        first = index if spec.same_as is None else spec.same_as
        part = self._fitted.get(first) or Fitted(spec, first)
        self._fitted[index] = self._fitted[first] = part
        if part.out_since_us is not None:
            part.lie_shorted((self.now_us - part.out_since_us) * 1e-6)
        self._put(part)
        self.part_index = index

    def _put(self, part: Fitted) -> None:
        old = self.part
        old.plates = self.circuit.states()[2]
        old.out_since_us = self.now_us
        self.part, self.part_index = part, -1
        self._foreign_part = True
        link = part.link
        self.circuit.contacts = self.circuit.contacts._replace(connected=link.connected, extra_S=link.extra_S)
        self.circuit.fit(part.values(self._box_values), part.branch, part.plates)
        self._plan_flaw(self.now_us)
        self.find_next()

    # -- who could be hurt

    def lid_moved(self, opened: bool, why: str) -> None:
        """The lid has been opened or shut, and how."""
        self._why = why
        self._danger_known = False
        self._foreign_part = False
        self._reach_us = self.now_us + _REACH_US
        if not opened:
            self._run_open = False
        self.find_next()

    def watch_hands(self) -> None:
        """Called while the lid is open: note danger once an opening."""
        if self._danger_known or self.now_us < self._reach_us:
            return
        high, plate = abs(self.circuit.high_mean), 0.0
        if not self._foreign_part:
            plate = abs(self.circuit.states()[2].plate_V)
        elif not self.supply.on:
            return
        volts = max(high, plate)
        if volts > box().safe_V:
            self._danger_known = True
            stored = self.part.stored(self.circuit.states()[2])[0]
            self.harms.append(Harm(self.now_us * 1e-6, volts, stored, self._why))

    @property
    def truth(self) -> Truth:
        """What is really so."""
        across, low, plates = self.circuit.states()
        joule, coulomb = self.part.stored(plates)
        volts, contacts = plates.plate_V, self.circuit.contacts
        branch = self.part.branch.current(volts) if self.part.branch else 0.0
        return Truth(
            t_s=self.now_us * 1e-6,
            part_index=self.part_index,
            part_label=self.part.spec.label,
            part_V=volts,
            node_V=across + low,
            low_V=low,
            supply_V=self.circuit.s,
            stored_J=joule,
            stored_C=coulomb,
            capacitance_F=self.part.spec.capacitance_F,
            leakage_A=volts * (1.0 / self.part.spec.leakage_ohm + contacts.extra_S) + branch,
            lid_open=self.lid.is_open,
            bolt_closed=self.lid.bolt,
            supply_on=self.supply.on,
            bleeding=contacts.bleed or (contacts.charge == CHARGE_REST and not contacts.bleed2_open),
            connected=contacts.connected,
            runs=self.runs,
            harms=tuple(self.harms),
        )

    # -- keeping

    def model_state(self) -> dict[str, Any]:
        """Everything that changes, JSON-able."""
        return {
            "plain": {name: deepcopy(getattr(self, name)) for name in _PLAIN},
            "fitted": [
                [index, part.state()] for index, part in sorted(self._fitted.items()) if part.first == index
            ],
            "indices": {str(index): part.first for index, part in self._fitted.items()},
            "chance": [self.chance.state, self.chips.at, self.chips.stride],
            "harms": [asdict(harm) for harm in self.harms],
            "circuit": self.circuit.state(),
            "relays": self.relays.state(),
            "supply": self.supply.state(),
            "lid": self.lid.state(),
            "operator": self.operator.state(),
            "faults": self.fault_clock.state(),
        }

    def load_model(self, kept: dict[str, Any]) -> None:
        """Take up what `model_state` gave."""
        for name, value in kept["plain"].items():
            setattr(self, name, deepcopy(value))
        made = {index: self._made(index, state) for index, state in kept["fitted"]}
        self._fitted = {int(index): made[first] for index, first in kept["indices"].items()}
        self.part = self._fitted[self.part_index] if self.part_index >= 0 else Fitted(EMPTY)
        self.chance.state, self.chips.at, self.chips.stride = kept["chance"]
        self.harms = [Harm(**harm) for harm in kept["harms"]]
        self.circuit.load(kept["circuit"], self.part.values(self._box_values), self.part.branch)
        self.relays.load(kept["relays"])
        self.supply.load(kept["supply"])
        self.lid.load(kept["lid"])
        self.operator.load(kept["operator"])
        self.fault_clock.load(kept["faults"])
        self.rewire()
        self.chips_changed()
        self.find_next()

    def _made(self, index: int, state: dict[str, Any]) -> Fitted:
        part = Fitted(self.scenario.parts[index], index)
        part.load(state)
        return part
