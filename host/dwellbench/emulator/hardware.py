"""The box's hardware without its controller: circuit, relays, supply, lid, converters, and what faults
have changed in them."""

from __future__ import annotations

from dwellbench.emulator import front_end
from dwellbench.emulator.circuit import Circuit
from dwellbench.emulator.converters import Chips, Line, lines, static_volts
from dwellbench.emulator.dice import Dice
from dwellbench.emulator.lid import Lid
from dwellbench.emulator.network import CHARGE_MADE, CHARGE_NONE, CHARGE_REST, Switches
from dwellbench.emulator.part_spec import PartSpec
from dwellbench.emulator.parts import Fitted
from dwellbench.emulator.reference import channels
from dwellbench.emulator.relays import BLEED, CHARGE, LOW, MID, REST, TRAVEL, WORK, Relays
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.supply import Supply

TICK_US = 100_000  # temperature, slow changes of the part, noise
EMPTY = PartSpec(label="", open_lead=True)
_CHARGE_SIDE = {REST: CHARGE_REST, TRAVEL: CHARGE_NONE, WORK: CHARGE_MADE}


class Hardware:
    """One box of the seed with nothing fitted."""

    def __init__(self, scenario: Scenario, seed: int) -> None:
        self.scenario, self.seed = scenario, seed
        self.now_us = 0
        self.unique_id = f"{Dice(seed, 'unique id').bits():016x}"
        self.errors = front_end.errors(seed, scenario.front_end)
        self.chance = Dice(seed, "chance")
        self.part = Fitted(EMPTY)
        self._box_values = front_end.values(self.errors, scenario.humidity_percent)
        self._make_hardware(seed)
        self._make_overrides()

    def _make_hardware(self, seed: int) -> None:
        e = self.errors
        self.relays = Relays(e, Dice(seed, "relays"))
        self.supply = Supply(e, Dice(seed, "supply"))
        self.lid = Lid(e.bolt_ms, Dice(seed, "lid"))
        self.chips = Chips(e, self.scenario.ambient_C, self.chance)
        omega = 6.283185307179586 * e.mains_Hz
        self.circuit = Circuit(
            self._box_values, omega, front_end.windows_s(e), complex(e.mains_A), complex(e.ripple_V)
        )

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
        self.chips_ill = False
        self.clock_offset_ms = 0
        self.celsius = self._warm_goal = self.scenario.ambient_C
        self._warm_K_per_s = 0.0
        self.rewire()

    # -- converters

    def rewire(self) -> None:
        """Make the converters' lines and steady inputs anew (a fault or the warmth changed them)."""
        number, chips = channels(), self.chips
        chips.lines = lines(self.errors)
        for name, factor in self.divider_factor.items():
            for k in (0, 1):
                row = chips.lines[0][number[name] * 2 + k]
                chips.lines[0][number[name] * 2 + k] = Line(row.scale * factor, row.offset, row.noise)
        volts = static_volts(self.errors, self.celsius)
        if self.thermistor_fixed_V is not None:
            volts["thermistor"] = self.thermistor_fixed_V
        volts["reference_a"] *= self.reference_factor[0]
        volts["reference_b"] *= self.reference_factor[1]
        chips.static_V = {number[name]: value for name, value in volts.items()}

    def chips_changed(self) -> None:
        """A converter fell ill or is well again."""
        self.chips_ill = not self.powered or True in self.silent or self.stuck_code != [None, None]

    def warm_to(self, celsius: float, over_s: float) -> None:
        """Let the part's surroundings go to `celsius`, evenly, in `over_s`."""
        self._warm_goal = celsius
        self._warm_K_per_s = (celsius - self.celsius) / max(over_s, 0.1)

    def _warm(self) -> None:
        if self.celsius == self._warm_goal:
            return
        step = self._warm_K_per_s * TICK_US * 1e-6
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
        """Contacts thrown in the period from `now` to `end`, in order; the first entry is how they stand
        at its beginning."""
        changes = []
        contacts = self._contacts()
        if contacts != self.circuit.contacts:
            changes.append((0.0, contacts))
        due = self.relays.due
        while due and due[0].at_us < end:
            event = due.pop(0)
            if self.relays.move(event):
                changes.append((max(event.at_us - now, 0) * 1e-6, self._contacts()))
        return changes
