"""Traces straight from circuit and front end, without firmware, wire and operator: for statistics over
thousands of parts.

The course is the firmware's for a part that is sound enough to be held: auto-zero of every level, charge
by ramp or by step, the dwell with its steps to finer shunts, the first of the discharge. Left out are the
proofs of the way down and the 20 V look (so absorption begins with the charge), relay travel and bounce,
interlocks. A test holds that firmware-driven runs agree.

`trace(part, volts, dwell_s, seed)` gives rows as in the ring; `record(...)` the rows with the box's
calibration and the truth.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from dwellbench.emulator.circuit_state import PERIOD_S
from dwellbench.emulator.network import CHARGE_MADE, CHARGE_REST
from dwellbench.emulator.part_spec import PartSpec
from dwellbench.emulator.recorder import LEVELS, SLOTS, WINDOW_MS, Recorder, Row
from dwellbench.emulator.reference import box, flags

_FINE_BELOW_V = 230.0
_RAMP_V_PER_S, _RAMP_BELOW_S, _RAMP_REST_MS = 100.0, 0.5, 200
_SHARE = 0.6


@dataclass(frozen=True)
class Recording:
    """What a direct run gives: rows, the box's calibration, and what is true at the end of the dwell
    (amperes, farads, volts)."""

    rows: list[Row]
    calibration: dict[str, Any]
    capacitance_F: float
    leakage_A: float  # conduction through the part alone
    shunt_A: float  # everything through the shunt: conduction, absorption, charging, fixture
    part_V: float


def trace(part: PartSpec, volts: float, dwell_s: float, seed: int) -> list[Row]:
    """Sample rows [n, t, stage, shunt, range, nv, sv, vmin, vmax, ni, si, imin, imax, iclip, vs, temp,
    flags, vrange] of `part` held at `volts` for `dwell_s` seconds in the box of `seed`."""
    return record(part, volts, dwell_s, seed).rows


def record(
    part: PartSpec,
    volts: float,
    dwell_s: float,
    seed: int,
    *,
    box_seed: int | None = None,
    settings: dict[str, Any] | None = None,
) -> Recording:
    """The same with calibration and truth. `box_seed`: the box, if not that of `seed` (noise stays
    `seed`'s); `settings`: as `[front_end]`."""
    run = _Course(part, seed if box_seed is None else box_seed, seed, settings)
    run.zero()
    run.charge(volts)
    run.dwell(dwell_s)
    truth = run.truth()
    run.discharge(1.0)
    return Recording(run.rows, run.calibration, part.capacitance_F, *truth)


class _Course(Recorder):
    """The stages of a run, one after the other."""

    def zero(self) -> None:
        """Every level, most sensitive first, one window to settle and one to keep."""
        self.v_range = 1
        for level in reversed(range(len(LEVELS))):
            self.read_on(level)
            self.window("zero")
            self.window("zero")

    def charge(self, volts: float) -> None:
        """By ramp if the part is small, else by step."""
        nominal = box()
        setting = min(volts * (1.0 + nominal.charge_ohm / nominal.divider_ohm), nominal.supply_max_V)
        tau = nominal.charge_ohm * self.nominal_nF * 1e-9
        self.v_range = 1 if volts < _FINE_BELOW_V else 0
        ramp = 5.0 * tau < _RAMP_BELOW_S
        self.read_on(self.finest(self.nominal_nF * 1e-9 * _RAMP_V_PER_S + 20e-9) if ramp else 0)
        self.contacts(charge=CHARGE_MADE, bleed=False, supply_on=True)
        self.supply.on = self.supply.moving = True
        if ramp:
            self._ramp(setting)
        else:
            self._step(setting, tau)
        self._held_ms = self.ms

    def _ramp(self, setting: float) -> None:
        self.rise_mv, self.goal_mv = round(_RAMP_V_PER_S * PERIOD_S * 1e3), round(setting * 1e3)
        while self.supply.setting_mv < self.goal_mv:
            left = -(-(self.goal_mv - self.supply.setting_mv) // self.rise_mv)
            self.window("charge", min(left, SLOTS), flags()["ramp"], counting=True)
        self.rise_mv = 0
        for _ in range(_RAMP_REST_MS // WINDOW_MS):
            self.window("charge", counting=True)

    def _step(self, setting: float, tau: float) -> None:
        self.supply.setting_mv = round(setting * 1e3)
        begin = self.ms
        while True:
            row = self.window("charge", counting=True)
            volts = row[6] / row[5] * box().ranges_V[self.v_range] / 32768 * box().divider_ratio
            if volts >= 0.993 * setting or self.ms - begin >= 6e3 * tau:
                return

    def dwell(self, seconds: float) -> None:
        """Hold; step to finer levels as the firmware does."""
        begin, flat, last = self.ms, 0, None
        tau_ms = box().charge_ohm * self.nominal_nF * 1e-6
        while self.ms - begin < round(seconds * 1e3):
            row = self.window("dwell")
            mean = row[10] / row[9]
            flat = flat + 1 if last is not None and abs(mean - last) <= 2.0 else 0
            last = mean
            gone = self.ms - begin
            since = gone + 6.0 * tau_ms
            may = (since >= 12.0 * tau_ms and gone >= 300) or (flat >= 5 and since >= 7.0 * tau_ms)
            if row[13] and self.level > 0:
                flat, last = 0, None
                self.read_on(1 if LEVELS[self.level][0] else 0)
            elif may and self.ms >= self.settled_ms + WINDOW_MS and not row[13]:
                level = self.finest(self._amps(max(row[12], -row[11], 1)) + 1e-9)
                if level > self.level:
                    flat, last = 0, None
                    self.read_on(level)

    def discharge(self, seconds: float) -> None:
        """Supply off, both bleeds on, low shunt."""
        self.supply.on = False
        self.circuit.set_slope(0.0)
        self.read_on(0)
        self.contacts(charge=CHARGE_REST, bleed=True, supply_on=False)
        for _ in range(round(seconds * 1e3) // WINDOW_MS):
            self.window("discharge")

    def _amps(self, code: int) -> float:
        shunt, fine = LEVELS[self.level]
        return code * box().ranges_V[fine] / 32768 / box().shunts_ohm[shunt]

    def finest(self, amps: float) -> int:
        """The most sensitive level that reads `amps` with room and settles with this part."""
        last = 1 if self.nominal_nF > 10_000 else 3 if self.nominal_nF > 1_000 else 5
        fitting = [
            k
            for k, (shunt, fine) in enumerate(LEVELS[: last + 1])
            if amps < _SHARE * box().ranges_V[fine] / box().shunts_ohm[shunt]
        ]
        return max(fitting, default=0)

    def truth(self) -> tuple[float, float, float]:
        """Conduction through the part, current through the shunt without mains and ripple, volts on the
        part."""
        circuit = self.circuit
        low = circuit.modal.low.now(circuit.y, circuit.drive._replace(ripple=0j, mains=0j))
        plates = circuit.states()[2]
        volts, branch = plates.plate_V, self.part.branch
        amps = volts * (1.0 / self.part.spec.leakage_ohm + self.part.link.extra_S) + (
            branch.current(volts) if branch else 0.0
        )
        return amps, low / circuit.values.shunts_ohm[LEVELS[self.level][0]], volts
