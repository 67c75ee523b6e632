"""Makes the small traces beside this file by stepping a circuit through time; shares no formula with the estimators.

The circuit's equations are stepped implicitly (backward Euler, 0.5 ms), leakage and absorption branches and all; rows are
plain means of the steps that fall into them, rounded as converters round. Run it to make them again:

    python tests/measure/data/make_traces.py

The values are those of the reference box except where a trace says otherwise; the truth of each stands in `truth.json`.
"""

from __future__ import annotations

import json
import random
from dataclasses import dataclass, field
from pathlib import Path

HERE = Path(__file__).resolve().parent
STEP_S = 0.0005
CHARGE_OHM = 400e3
DIVIDER_OHM = 100.1e6
FIXTURE_OHM = 1e12
FIXTURE_F = 2e-12
BLEED_OHM = 22e3
SLEW_V_PER_S = 10e3


@dataclass
class Case:
    """One part in the box. `leak` ohm; `rises` (volts, ohm there, exponent); `forming` (start A, settled A, time constant s)."""

    name: str
    capacitance_F: float
    leak_ohm: float
    supply_V: float
    absorption: list[tuple[float, float]] = field(default_factory=list)
    rises: tuple[float, float, float] | None = None
    forming: tuple[float, float, float] | None = None
    charge_s: float = 1.0
    dwell_s: float = 20.0
    dwell_shunt_ohm: float = 1e6
    dwell_range_V: float = 0.256
    ramp_V_per_s: float | None = None
    ramp_shunt_ohm: float = 560.0
    bursts_s: tuple[float, ...] = ()
    connected: bool = True
    recovery_s: float = 0.0
    gains: dict[str, float] = field(default_factory=dict)
    seed: int = 1


CASES = [
    Case(
        "film_47n",
        47e-9,
        3e10,
        632.5,
        [(0.3, 0.0006), (3.0, 0.0006), (30.0, 0.0006)],
        ramp_V_per_s=100.0,
        ramp_shunt_ohm=1e5,
    ),
    Case("film_1u_step", 1e-6, 2e10, 401.6, [(0.3, 0.0006), (3.0, 0.0006)], charge_s=4.0, recovery_s=5.0),
    Case(
        "paper_2M",
        50e-9,
        2e6,
        602.4,
        [(0.3, 0.008), (3.0, 0.008)],
        ramp_V_per_s=100.0,
        dwell_shunt_ohm=560.0,
        dwell_range_V=0.256,
    ),
    Case(
        "electrolytic_forming",
        22e-6,
        2e9,
        451.8,
        [(1.0, 0.01), (10.0, 0.01)],
        forming=(4e-4, 3e-5, 60.0),
        charge_s=53.0,
        dwell_s=60.0,
        dwell_shunt_ohm=560.0,
    ),
    Case(
        "electrolytic_sound",
        22e-6,
        2e9,
        451.8,
        [(1.0, 0.01), (10.0, 0.01)],
        forming=(2e-5, 5e-6, 20.0),
        charge_s=53.0,
        dwell_s=120.0,
        dwell_shunt_ohm=560.0,
    ),
    Case(
        "superlinear", 100e-9, 1e10, 602.4, rises=(600.0, 5e7, 5.0), ramp_V_per_s=100.0, dwell_shunt_ohm=560.0
    ),
    Case("open_lead", 1e-12, 1e14, 401.6, connected=False, charge_s=0.7),
    Case(
        "bursts", 100e-9, 2e10, 401.6, [(0.3, 0.0006)], dwell_shunt_ohm=1e5, bursts_s=(4.0, 7.3, 11.0, 15.6)
    ),
    Case(
        "clipped",
        50e-9,
        2e6,
        602.4,
        ramp_V_per_s=100.0,
        ramp_shunt_ohm=1e5,
        dwell_s=5.0,
        dwell_shunt_ohm=560.0,
    ),
    Case("mica_100p", 100e-12, 4e11, 502.0, ramp_V_per_s=100.0, ramp_shunt_ohm=1e6),
]


class Bench:
    """The circuit between supply and ground, stepped."""

    def __init__(self, case: Case) -> None:
        self.case = case
        self.part_V = 0.0
        self.stored_V = [0.0] * len(case.absorption)
        self.forming_s = 0.0
        self.node_V = 0.0
        self.amps = 0.0

    def leak_S(self) -> float:
        """Conductance of the part at its present voltage, absorption apart."""
        case, volts = self.case, max(self.part_V, 1e-9)
        siemens = 1.0 / case.leak_ohm + 1.0 / FIXTURE_OHM
        if case.rises is not None:
            at, ohm, exponent = case.rises
            siemens += (volts / at) ** exponent * at / ohm / volts
        if case.forming is not None:
            start, rest, tau = case.forming
            amps = rest + (start - rest) * 2.718281828459045 ** (-self.forming_s / tau)
            siemens += amps / case.supply_V * (volts / case.supply_V) ** 2
        return siemens

    def step(self, feed_V: float | None, shunt_ohm: float, bleed: bool, extra_A: float) -> None:
        """One step: `feed_V` behind the charge path (None: open), bleed closed or not, `extra_A` through a burst."""
        case, dt = self.case, STEP_S
        farads = case.capacitance_F + FIXTURE_F
        to_node = (
            (0.0 if feed_V is None else 1.0 / CHARGE_OHM)
            + 1.0 / DIVIDER_OHM
            + (1.0 / BLEED_OHM if bleed else 0.0)
        )
        push = 0.0 if feed_V is None else feed_V / CHARGE_OHM
        # current into the part as a line in its voltage at the end of the step: node = (push - I) / to_node
        across_S = farads / dt + self.leak_S()
        known = farads / dt * self.part_V - extra_A
        for k, (tau, share) in enumerate(case.absorption):
            conductance = share * case.capacitance_F / (tau + dt)
            across_S += conductance
            known += conductance * self.stored_V[k]
        loop = 1.0 / to_node + shunt_ohm
        self.part_V = (push / to_node + loop * known) / (1.0 + loop * across_S)
        self.amps = across_S * self.part_V - known
        self.node_V = self.part_V + self.amps * shunt_ohm
        for k, (tau, _) in enumerate(case.absorption):
            self.stored_V[k] += dt / (tau + dt) * (self.part_V - self.stored_V[k])
        if self.part_V > 0.5 * case.supply_V:
            self.forming_s += dt


class Writer:
    """Averages steps into rows and rounds them as the converters do."""

    def __init__(self, case: Case) -> None:
        self.case, self.rows, self.chance = case, [], random.Random(case.seed)
        self.time_s = 0.0

    def stage(
        self,
        bench: Bench,
        name: str,
        seconds: float,
        supply,
        shunt_ohm: float,
        range_V: float,
        bleed: bool = False,
    ) -> None:
        """Run one stage of whole rows; `supply(t)` gives the feed's volts or None."""
        per_row = 200
        for row in range(round(seconds / (per_row * STEP_S))):
            volts, amps, feed = [], [], []
            for k in range(per_row):
                at = (row * per_row + k + 1) * STEP_S
                burst = any(abs(at - when) < 0.012 for when in self.case.bursts_s) and name == "dwell"
                bench.step(supply(at), shunt_ohm, bleed, 2e-6 if burst else 0.0)
                volts.append(bench.node_V)
                amps.append(bench.amps)
                feed.append(supply(at) or 0.0)
            self.time_s += per_row * STEP_S
            self.rows.append(self.row(name, shunt_ohm, range_V, volts, amps, feed))

    def row(
        self,
        name: str,
        shunt_ohm: float,
        range_V: float,
        volts: list[float],
        amps: list[float],
        feed: list[float],
    ) -> str:
        """One line of the table: twenty conversions in a row, each rounded to a code."""
        unit_V, unit_A = 1.024 / 32768.0 * 1001.0, range_V / 32768.0 / shunt_ohm
        noise = self.chance.gauss
        v = [round(x / unit_V + noise(0.0, 0.6)) for x in volts[5::10]]
        raw = [round(x / unit_A + noise(0.0, 0.8)) for x in amps[5::10]]
        i = [max(-32768, min(32767, code)) for code in raw]
        clipped = sum(abs(code) >= 32760 for code in raw) / len(raw)
        cells = [
            f"{self.time_s:.3f}",
            name,
            f"{shunt_ohm:g}",
            f"{sum(v) / len(v) * unit_V:.4f}",
            f"{sum(i) / len(i) * unit_A:.6e}",
            f"{sum(feed) / len(feed):.2f}",
            f"{clipped:.2f}",
            f"{min(v) * unit_V:.3f}",
            f"{max(v) * unit_V:.3f}",
            f"{min(i) * unit_A:.5e}",
            f"{max(i) * unit_A:.5e}",
            f"{range_V:g}",
        ]
        return ",".join(cells)


def make(case: Case) -> dict[str, float]:
    """Write one trace; return its truth at the end of the dwell."""
    bench, writer = Bench(case), Writer(case)
    ramp = case.ramp_V_per_s
    slew = ramp or SLEW_V_PER_S
    charge_s = case.charge_s if ramp is None else round(case.supply_V / ramp + 0.35, 1)

    def feed(at: float) -> float:
        return min(slew * at, case.supply_V)

    if ramp is None:
        writer.stage(bench, "charge", 0.1, lambda at: 0.0, 560.0, 1.024)
    writer.stage(bench, "charge", charge_s, feed, case.ramp_shunt_ohm, 1.024)
    writer.stage(
        bench, "dwell", case.dwell_s, lambda at: case.supply_V, case.dwell_shunt_ohm, case.dwell_range_V
    )
    truth = {
        "capacitance_F": case.capacitance_F if case.connected else 0.0,
        "volts_V": bench.part_V,
        "leak_ohm": 1.0 / (bench.leak_S() - 1.0 / FIXTURE_OHM),
        "total_ohm": bench.part_V / (bench.amps - bench.part_V / FIXTURE_OHM),
        "conduction_A": bench.part_V * (bench.leak_S() - 1.0 / FIXTURE_OHM),
    }
    writer.stage(bench, "discharge", 1.0, lambda at: None, 560.0, 1.024, bleed=True)
    if case.recovery_s:
        writer.stage(bench, "recovery", case.recovery_s, lambda at: None, 1e6, 1.024)
        truth["recovered_V"] = bench.part_V
    head = [
        "t_s,stage,shunt_ohm,v_part_V,i_shunt_A,v_supply_V,clipped,v_min_V,v_max_V,i_min_A,i_max_A,range_V"
    ]
    stated = ["# fixture_ohm = 1e12", "# temperature_C = 23", "# u_gain_v = 0.001", "# u_gain_i = 0.001"]
    (HERE / f"{case.name}.csv").write_text("\n".join([*stated, *head, *writer.rows]) + "\n", encoding="utf-8")
    return truth


if __name__ == "__main__":
    truths = {case.name: make(case) for case in CASES}
    (HERE / "truth.json").write_text(json.dumps(truths, indent=1) + "\n", encoding="utf-8")
