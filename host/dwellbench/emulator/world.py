"""The whole bench in virtual time: box without its controller, part, operator and faults, one control
period a call.

A board asks for nothing but `period`, `inputs`, `codes` and the few flags; what only a test may know is
behind `truth`. Nothing here reads a clock or sleeps: time passes when `period` is called, and the same
scenario, seed and calls give the same codes on every machine. This file is the periods; what is in the box
and who is at it is bench_model.py.
"""

from __future__ import annotations

from typing import Any

from dwellbench.emulator.bench_model import PERIOD_US, BenchModel
from dwellbench.emulator.converters import calibration
from dwellbench.emulator.reference import bits, box
from dwellbench.emulator.relays import BLEED, CHARGE, LOW, MID
from dwellbench.emulator.scenario import Scenario

NO_CODE = 40000
"""What `codes` holds when the chip did not answer or nothing was started."""
NO_CONVERSION = -1
CAUSE_POWER, CAUSE_RESET = 0, 1
_WRAP = 1 << 30
_IN, _OUT = bits("inputs"), bits("outputs")
_COILS = (
    (BLEED, _OUT["bleed_open"]),
    (CHARGE, _OUT["charge"]),
    (MID, _OUT["mid_shunt"]),
    (LOW, _OUT["low_open"]),
)
_RELEASE = _OUT["release"]


class World(BenchModel):
    """`World(scenario, seed)`; `seed` None takes the scenario's.

    Call `period` once every 5 ms of virtual time with what the controller put out; then read `inputs` and
    `codes`.

    inputs            raw levels after the period, bits as codes.json `inputs` codes             two codes,
    converter 0 and 1, of the conversions started at the beginning of the period now_us            virtual
    time since power-up, microseconds; goes on through resets controller_hung   while True the controller
    must not be stepped: call `period` with outputs held, nothing else link_silent       while True no byte
    passes either way unique_id         16 hex digits, from the seed calibration       as the box keeps it,
    drawn within its own stated uncertainty; None if `[front_end] calibrated = false` truth
    what is really so, for tests only
    """

    def __init__(self, scenario: Scenario, seed: int | None = None) -> None:
        super().__init__(scenario, scenario.seed if seed is None else seed)
        self.codes = [NO_CODE, NO_CODE]
        self.inputs = 0
        self._outputs = 0
        self._pumped_us = self._fed_us = -1
        self._hv = False
        self._reset = -1
        keep = (scenario.front_end or {}).get("calibrated", True)
        self.calibration = (
            calibration(self.errors, self.seed, self.unique_id, scenario.ambient_C) if keep else None
        )
        wrap = [round(f.at_s * 1e3) for f in scenario.faults if f.kind == "clock_wrap"]
        self.clock_offset_ms = (_WRAP - wrap[0]) if wrap else scenario.clock_ms
        self._pump_hold_us = round(box().pump_hold_s * 1e6)
        self._watchdog_us = round(box().watchdog_s * 1e6)
        self._sense()

    # -- what a board calls

    def period(self, outputs: int, supply_mv: int, pumps: int, feeds: int, conv0: int, conv1: int) -> None:
        """Advance 5 ms. `outputs` bits as codes.json; `pumps`, `feeds`: how often the enable was toggled,
        the watchdog fed; `conv0`, `conv1`: channel * 2 + range of the conversion started on each
        converter, or NO_CONVERSION.

        `codes` then holds what those conversions give (mean over the chip's own 4 ms of this period).
        KeyError for a channel that the converter does not have.
        """
        now = self.now_us  # one long function: this is the path of every period, and calls cost
        supply, circuit = self.supply, self.circuit
        if outputs != self._outputs:
            self._drive(outputs)
        if pumps:
            self._pumped_us = now
            if not supply.on:
                self._switch_supply()
        elif supply.on and now - self._pumped_us >= self._pump_hold_us:
            self._switch_supply()
        if feeds:
            self._fed_us = now
        elif 0 <= self._fed_us < now - self._watchdog_us:
            self.ask_reset()
        if supply_mv != supply.setting_mv:
            supply.setting_mv = supply_mv
            supply.moving = True
        if supply.moving and supply.on:
            slope, volts = supply.slope(circuit.s, now)
            circuit.set_supply(volts)
            circuit.set_slope(slope)
        self.now_us = end = now + PERIOD_US
        if self.next_us < end:
            circuit.period(self._due(now, end))
        else:
            circuit.period()
        high = abs(circuit.high_mean)
        if high > self.errors.detector_on_V if not self._hv else high < self.errors.detector_off_V:
            self._hv = not self._hv
            self._sense()
        if self.lid.is_open:
            self.watch_hands()
        self._convert(conv0, conv1)

    def clock_ms(self) -> int:
        """The controller's millisecond counter, 0..2**30-1; wraps; jumps if a fault makes it."""
        return (self.now_us // 1000 + self.clock_offset_ms) % _WRAP

    def take_reset(self) -> int:
        """-1, or CAUSE_POWER / CAUSE_RESET once when the controller is to start anew now (watchdog, fault,
        power). The board drops RAM (and scratch after a power loss) and calls with outputs 0 until the new
        controller puts something out."""
        cause, self._reset = self._reset, -1
        if cause >= 0:
            self._fed_us = -1
            self.controller_hung = False
        return cause

    def run_began(self) -> None:
        """The board tells that a run has begun (the marker is being kept), so that faults with `run` and
        `at_s` find it and the operator knows what the next release of the lock means. Without it a run is
        seen when the supply is first pumped."""
        self.begin_run()

    # -- inside a period

    def ask_reset(self) -> None:
        """The controller is to start anew."""
        self._reset = max(self._reset, CAUSE_RESET)

    def set_power(self, on: bool) -> None:
        """The whole box loses its power, or has it again."""
        self.powered = on
        self.chips_changed()
        self.controller_hung = not on
        if on:
            self._reset = CAUSE_POWER
            self.clock_offset_ms = -(self.now_us // 1000)
        self._pumped_us = -1
        self._drive(0)
        self._switch_supply()

    def _drive(self, outputs: int) -> None:
        self._outputs = outputs if self.powered else 0
        self._wire()

    def _wire(self) -> None:
        """Coils and lock, as outputs and wiring let them: the charge relay's coil needs the lid, the
        release the detector."""
        for relay, mask in _COILS:
            on = bool(self._outputs & mask)
            self.relays.drive(relay, on and (relay != CHARGE or self.lid.wired), self.now_us)
        gate = not (self._hv if self.detector_stuck is None else self.detector_stuck)
        self.lid.power(bool(self._outputs & _RELEASE) and gate, self.now_us)
        self.find_next()

    def _switch_supply(self) -> None:
        """On while pumped, enabled by the lid's wiring, and powered."""
        supply = self.supply
        pumped = self._pumped_us >= 0 and self.now_us - self._pumped_us < self._pump_hold_us
        on = (
            self.powered
            and self.lid.wired
            and (pumped or supply.fault.always_enabled or supply.fault.stuck_V is not None)
        )
        if on != supply.on:
            supply.on = on
            self.supply_switched(on)

    def _due(self, now: int, end: int) -> list[Any]:
        """What happens in this period: mechanics at its beginning, contacts at their own microseconds."""
        if self.tick(now):
            self.chips.stir()
        self._switch_supply()
        self._wire()
        self._sense()
        changes = self.contact_changes(now, end)
        self.find_next()
        return changes

    def _sense(self) -> None:
        hv = self._hv if self.detector_stuck is None else bool(self.detector_stuck)
        lid = self.lid
        level = (
            (_IN["lid_a"] if lid.closed_a else 0)
            | (0 if lid.closed_b else _IN["lid_b"])
            | (_IN["stop"] if self.stop_pressed else 0)
            | (_IN["hv"] if hv else 0)
            | (_IN["locked"] if lid.bolt else 0)
        )
        if (level ^ self.inputs) & _IN["hv"]:
            self.inputs = level
            self._wire()
        self.inputs = level

    def _convert(self, conv0: int, conv1: int) -> None:
        codes, circuit, chips = self.codes, self.circuit, self.chips
        codes[0] = chips.first(conv0, circuit.high_mean, circuit.supply_mean) if conv0 >= 0 else NO_CODE
        codes[1] = chips.second(conv1, circuit.low_mean) if conv1 >= 0 else NO_CODE
        if self.chips_ill:
            self._ill_codes()

    def _ill_codes(self) -> None:
        for unit in (0, 1):
            stuck = self.stuck_code[unit]
            if self.silent[unit] or not self.powered:
                self.codes[unit] = NO_CODE
            elif stuck is not None and self.codes[unit] != NO_CODE:
                self.codes[unit] = stuck

    # -- keeping

    def snapshot(self) -> dict[str, Any]:
        """Everything that changes, JSON-able; `restore` on a World of the same scenario and seed goes on
        with the same codes."""
        own = [self._outputs, self._pumped_us, self._fed_us, self._hv, self._reset]
        return {
            "seed": self.seed,
            "own": own,
            "codes": list(self.codes),
            "inputs": self.inputs,
            **self.model_state(),
        }

    def restore(self, kept: dict[str, Any]) -> None:
        """Take up a snapshot."""
        if kept["seed"] != self.seed:
            raise ValueError("the snapshot is of another seed")
        self.load_model(kept)
        self.codes, self.inputs = list(kept["codes"]), kept["inputs"]
        self._outputs, self._pumped_us, self._fed_us, self._hv, self._reset = kept["own"]
