"""The box's insides and the people around it, put together: circuit, relays, supply, lid, part, operator, faults.

world.py steps it; here is what happens at the rarer moments, and the truth about it all.
"""

from __future__ import annotations

from typing import Any

from dwellbench.emulator import front_end
from dwellbench.emulator.circuit import Circuit
from dwellbench.emulator.converters import Line, lines, static_volts
from dwellbench.emulator.dice import Dice
from dwellbench.emulator.faults import NEVER_US, PART_KINDS, FaultClock
from dwellbench.emulator.lid import Lid
from dwellbench.emulator.network import CHARGE_MADE, CHARGE_NONE, CHARGE_REST, Switches
from dwellbench.emulator.operator import Operator
from dwellbench.emulator.parts import Fitted
from dwellbench.emulator.reference import box, channels
from dwellbench.emulator.relays import BLEED, CHARGE, LOW, MID, REST, TRAVEL, WORK, Relays
from dwellbench.emulator.scenario import PartSpec, Scenario
from dwellbench.emulator.supply import Supply
from dwellbench.emulator.trouble import ACTS
from dwellbench.emulator.truth import Harm, Truth

PERIOD_US = 5000
_TICK_US = 100_000  # temperature, slow changes of the part, noise
_DRIFT_TICKS = 10
_EMPTY = PartSpec(label="", open_lead=True)
_CHARGE_SIDE = {REST: CHARGE_REST, TRAVEL: CHARGE_NONE, WORK: CHARGE_MADE}


class BenchModel:
    """Everything of the world that is not the stepping of a period."""

    def __init__(self, scenario: Scenario, seed: int) -> None:
        self.scenario, self.seed = scenario, seed
        self.now_us = 0
        self.unique_id = f"{Dice(seed, 'unique id').bits():016x}"
        self.errors = front_end.errors(seed, scenario.front_end)
        self.chance = Dice(seed, "chance")
        self._box_values = front_end.values(self.errors)
        self._make_hardware(seed)
        self._make_overrides()
        self.operator = Operator(scenario.operator)
        self.fault_clock = FaultClock(scenario.faults)
        self._fitted: dict[int, Fitted] = {}
        self.part_index = -1
        self.part = Fitted(_EMPTY)
        self.runs = 0
        self._run_open = False
        self.harms: list[Harm] = []
        self._danger_known = False
        self._foreign_part = False  # the part came in after the lid was opened: its charge is not the box's doing
        self._tick_us, self._ticks = _TICK_US, 0
        self.next_us = 0
        self.fit(0)

    def _make_hardware(self, seed: int) -> None:
        e = self.errors
        self.relays = Relays(e, Dice(seed, "relays"))
        self.supply = Supply(e, Dice(seed, "supply"))
        self.lid = Lid(e.bolt_ms, Dice(seed, "lid"))
        omega = 6.283185307179586 * e.mains_Hz
        self.circuit = Circuit(self._box_values, omega, front_end.windows_s(e), complex(e.mains_A), complex(e.ripple_V))

    def _make_overrides(self) -> None:
        """What faults change; each is back at its first value when the fault is over."""
        self.paths = {"bleed_open": False, "bleed2_open": False, "charge_open": False, "divider_open": False}
        self.fixture_S = 0.0
        self.divider_factor = {"part": 1.0, "supply": 1.0}
        self.reference_factor = [1.0, 1.0]
        self.thermistor_fixed_V: float | None = None
        self.detector_stuck: int | None = None
        self.silent = [False, False]
        self.stuck_code: list[int | None] = [None, None]
        self.stop_pressed = self.controller_hung = self.link_silent = False
        self.powered = True
        self.clock_offset_ms = 0
        self.celsius = self._warm_goal = self.scenario.ambient_C
        self._warm_K_per_s = 0.0
        self.rewire()

    # -- converters

    def rewire(self) -> None:
        """Make the converters' lines anew (a fault changed them)."""
        number = channels()
        self.lines = lines(self.errors)
        for name, factor in self.divider_factor.items():
            for k in (0, 1):
                row = self.lines[0][number[name] * 2 + k]
                self.lines[0][number[name] * 2 + k] = Line(row.scale * factor, row.offset, row.noise)
        volts = static_volts(self.errors, self.celsius)
        if self.thermistor_fixed_V is not None:
            volts["thermistor"] = self.thermistor_fixed_V
        volts["reference_a"] *= self.reference_factor[0]
        volts["reference_b"] *= self.reference_factor[1]
        self.static_V = {number[name]: value for name, value in volts.items()}

    @property
    def chips_ill(self) -> bool:
        """A converter is not as it should be."""
        return not self.powered or True in self.silent or self.stuck_code != [None, None]

    def warm_to(self, celsius: float, over_s: float) -> None:
        """Let the part's surroundings go to `celsius`, evenly, in `over_s`."""
        self._warm_goal = celsius
        self._warm_K_per_s = (celsius - self.celsius) / max(over_s, 0.1)

    def _warm(self) -> None:
        if self.celsius == self._warm_goal:
            return
        step = self._warm_K_per_s * _TICK_US * 1e-6
        left = self._warm_goal - self.celsius
        self.celsius = self._warm_goal if abs(step) >= abs(left) else self.celsius + step
        self.rewire()

    # -- contacts

    def _contacts(self) -> Switches:
        position, link, paths = self.relays.position, self.part.link, self.paths
        shunt = 0 if position[LOW] == REST else 1 if position[MID] == WORK else 2
        return Switches(
            charge=_CHARGE_SIDE[position[CHARGE]],
            bleed=position[BLEED] == REST and not paths["bleed_open"],
            shunt=shunt,
            supply_on=self.supply.on,
            connected=link.connected,
            extra_S=link.extra_S,
            charge_open=paths["charge_open"],
            bleed2_open=paths["bleed2_open"],
            divider_open=paths["divider_open"],
            fixture_S=self.fixture_S,
        )

    def contact_changes(self, now: int, end: int) -> list[tuple[float, Switches]]:
        """Contacts thrown in the period from `now` to `end`, in order; the first entry is how they stand at its beginning."""
        changes = []
        contacts = self._contacts()
        if contacts != self.circuit.contacts:
            changes.append((0.0, contacts))
        due = self.relays.due
        while due and due[0].at_us < end:
            event = due.pop(0)
            if self.relays.move(event):
                changes.append((max(event.at_us - now, 0) * 1e-6, self._contacts()))
        self.find_next()
        return changes

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
        self._tick_us = now + _TICK_US
        self._slow_changes(now)
        return True

    def _slow_changes(self, now: int) -> None:
        self._ticks += 1
        if self._ticks % _DRIFT_TICKS == 0:
            self.supply.wander(now)
        self._warm()
        late = self.part.spec.late_leak
        if late and abs(self.circuit.states()[2].plate_V) > late.above_V:
            self.part.stressed_s += _TICK_US * 1e-6

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
        self._put(Fitted(_EMPTY))

    def fit_next(self) -> None:
        """Fit the next part of the scenario; the last one stays the last."""
        self.fit(min(max(self._fitted, default=-1) + 1, len(self.scenario.parts) - 1))

    def fit(self, index: int) -> None:
        """Fit part `index` of the scenario."""
        if not self.scenario.parts:
            self._put(Fitted(_EMPTY))
            return
        spec = self.scenario.parts[index]
        first = index if spec.same_as is None else spec.same_as
        part = self._fitted.get(first) or Fitted(spec)
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
        if not opened:
            self._run_open = False
        self.find_next()

    def watch_hands(self) -> None:
        """Called while the lid is open: note danger once an opening."""
        if self._danger_known:
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
        return {}

    def load_model(self, kept: dict[str, Any]) -> None:
        """Take up what `model_state` gave."""
