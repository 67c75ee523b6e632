"""Windows of samples made straight from circuit and converters, as the firmware makes them: slots, means,
extremes, flags."""

from __future__ import annotations

from typing import Any

from dwellbench.emulator import front_end
from dwellbench.emulator.circuit import Circuit
from dwellbench.emulator.converters import Chips, calibration
from dwellbench.emulator.dice import Dice
from dwellbench.emulator.part_spec import PartSpec
from dwellbench.emulator.parts import Fitted
from dwellbench.emulator.reference import box, channels, flags, stages
from dwellbench.emulator.supply import Supply

Row = list[int]
LEVELS = ((0, 0), (0, 1), (1, 0), (1, 1), (2, 0), (2, 1))
"""(shunt, range) from the least to the most sensitive, as the firmware steps through them."""
SLOTS, _SUPPLY_SLOT, _OTHER_SLOT, _REFERENCE_EVERY = 20, 5, 14, 10
WINDOW_MS, _PERIOD_MS = 100, 5
_TOP = 32760
_CHANNEL = channels()
_PART, _SUPPLY, _SHUNT = _CHANNEL["part"] * 2, _CHANNEL["supply"] * 2, _CHANNEL["shunt"] * 2
_OTHERS = (_CHANNEL["reference_a"] * 2, _CHANNEL["thermistor"] * 2)


class Recorder:
    """One part in one box, and the rows so far; contacts are thrown between windows only."""

    def __init__(self, spec: PartSpec, box_seed: int, seed: int, settings: dict[str, Any] | None) -> None:
        errors = front_end.errors(box_seed, settings)
        self.part = Fitted(spec)
        values = self.part.values(front_end.values(errors))
        dice = Dice(seed, "direct")
        mains, ripple = complex(errors.mains_A), complex(errors.ripple_V)
        self.circuit = Circuit(
            values, 6.283185307179586 * errors.mains_Hz, front_end.windows_s(errors), mains, ripple
        )
        self.circuit.fit(values, self.part.branch, self.part.plates)
        self.chips = Chips(errors, 23.0, dice)
        self.supply = Supply(errors, dice)
        self.calibration = calibration(errors, box_seed, f"{Dice(box_seed, 'unique id').bits():016x}", 23.0)
        self.nominal_nF = spec.capacitance_F * 1e9
        self.rows: list[Row] = []
        self.ms = self._windows = 0
        self.level, self.v_range, self.settled_ms = 0, 0, 0
        self._temp = self._supply_code = 0
        self.rise_mv = self.goal_mv = (
            0  # a ramp: the setting goes up by the first every period, to the second
        )

    def contacts(self, **changes: Any) -> None:
        """Throw contacts; the part hangs in the circuit as its flaws say."""
        link = self.part.link
        contacts = self.circuit.contacts._replace(connected=link.connected, extra_S=link.extra_S, **changes)
        self.circuit.switch(contacts)

    def read_on(self, level: int) -> None:
        """Shunt and range of the next windows; they count as unsettled as the firmware reckons."""
        before, self.level = self.level, level
        shunt = LEVELS[level][0]
        if shunt == LEVELS[before][0]:
            blank = 100.0
        else:
            blank = 100.0 + 7e-9 * (box().shunts_ohm[shunt] + box().charge_ohm) * self.nominal_nF * 1e3 * 1e-3
        self.settled_ms = self.ms + round(blank)
        self.contacts(shunt=shunt)

    def window(self, stage: str, periods: int = SLOTS, flag: int = 0, counting: bool = False) -> Row:
        """One window of `periods` control periods; its row."""
        circuit, chips = self.circuit, self.chips
        high, low, part_conv = [], [], _PART + self.v_range
        shunt_conv = _SHUNT + LEVELS[self.level][1]
        skip = _OTHER_SLOT if not counting and self._windows % _REFERENCE_EVERY == 0 else -1
        for slot in range(periods):
            self._steer(slot)
            circuit.period()
            if slot == _SUPPLY_SLOT:
                self._supply_code = chips.first(_SUPPLY, circuit.high_mean, circuit.supply_mean)
            elif slot == _OTHER_SLOT:
                self._other()
            else:
                high.append(chips.first(part_conv, circuit.high_mean, 0.0))
            if slot != skip:
                low.append(chips.second(shunt_conv, circuit.low_mean))
        return self._close(
            stage, periods, high, low, flag | (flags()["short_window"] if periods < SLOTS else 0)
        )

    def _steer(self, slot: int) -> None:
        supply, circuit = self.supply, self.circuit
        if self.rise_mv:
            supply.setting_mv = min(self.goal_mv, supply.setting_mv + self.rise_mv)
            supply.moving = True
        if supply.on and (supply.moving or slot == 0):
            slope, volts = supply.slope(circuit.s, (self.ms + slot * _PERIOD_MS) * 1000)
            circuit.set_supply(volts)
            circuit.set_slope(slope)

    def _other(self) -> None:
        code = self.chips.first(_OTHERS[self._windows & 1], 0.0, 0.0)
        if self._windows & 1:
            self._temp = code

    def _close(self, stage: str, periods: int, high: list[int], low: list[int], flag: int) -> Row:
        start, self.ms = self.ms, self.ms + periods * _PERIOD_MS
        if start < self.settled_ms:
            flag |= flags()["unsettled"]
        if max(high) >= _TOP or min(high) <= -_TOP:
            flag |= flags()["v_clipped"]
        shunt, fine = LEVELS[self.level]
        clipped = sum(code >= _TOP or code <= -_TOP for code in low)
        row = [
            len(self.rows) + 1,
            self.ms,
            stages()[stage],
            shunt,
            fine,
            len(high),
            sum(high),
            min(high),
            max(high),
        ]
        row += [
            len(low),
            sum(low),
            min(low),
            max(low),
            clipped,
            self._supply_code,
            self._temp,
            flag,
            self.v_range,
        ]
        self.rows.append(row)
        self._windows += 1
        self.chips.stir()
        if self._windows % 10 == 0:
            self.supply.wander(self.ms * 1000)
        self._age()
        return row

    def _age(self) -> None:
        late = self.part.spec.late_leak
        if late and abs(self.circuit.high_mean) > late.above_V:
            self.part.stressed_s += WINDOW_MS * 1e-3
            self.contacts()
