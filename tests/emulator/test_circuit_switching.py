"""What must hold whenever the circuit goes from one network to another: charge, order of step, the clamp,
copies."""

from __future__ import annotations

import json
from dataclasses import replace
from itertools import pairwise

import pytest

from dwellbench.emulator.circuit import Circuit
from dwellbench.emulator.circuit_state import PERIOD_S, Plates
from dwellbench.emulator.network import CHARGE_MADE, CHARGE_NONE, Switches, Values
from dwellbench.emulator.part_spec import Superlinear
from dwellbench.emulator.parts import PowerLaw

CHARGING = Switches(charge=CHARGE_MADE, bleed=False, supply_on=True)


def values(farad: float = 47e-9, ohm: float = 1e15) -> Values:
    return Values(4e5, (22e3, 22e3), 100.1e6, 100.1e6, (560.0, 1e5, 1e6), 1e12, farad, 0.5, ohm, ())


def circuit(farad: float = 47e-9, ohm: float = 1e15) -> Circuit:
    return Circuit(values(farad, ohm), 314.0, (4e-3, 4e-3), 0j, 0j)


def charged(c: Circuit, volts: float, periods: int = 400) -> Circuit:
    c.switch(CHARGING)
    c.set_slope(volts / PERIOD_S)
    c.period()
    c.set_slope(0.0)
    for _ in range(periods):
        c.period()
    return c


def test_sums_of_window_means_over_a_full_period_are_the_charge_that_flowed():
    farad = 100e-9
    c = Circuit(replace(values(farad), fixture_ohm=1e18), 314.0, (PERIOD_S, PERIOD_S), 0j, 0j)
    c.switch(CHARGING)
    c.set_slope(300.0 / PERIOD_S)
    coulomb = 0.0
    for k in range(400):
        c.period()
        coulomb += c.low_mean / 560.0 * PERIOD_S
        if k == 0:
            c.set_slope(0.0)
    across, low, _ = c.states()
    stray = 2e-12 * across - 100e-12 * low  # the empty clips beside the part; the cable at the low node
    assert coulomb == pytest.approx(farad * across + stray, rel=1e-6)


def test_an_open_lead_keeps_the_charge_on_the_part_and_the_node_falls():
    c = charged(circuit(), 400.0)
    before = c.states()[2].plate_V
    c.switch(c.contacts._replace(connected=False))
    c.switch(Switches(connected=False))
    for _ in range(200):
        c.period()
    across, low, plates = c.states()
    assert plates.plate_V == pytest.approx(before, rel=1e-6)
    assert abs(across + low) < 1e-3


def test_a_lead_that_touches_again_shares_its_charge_with_the_clips():
    c = charged(circuit(100e-12), 400.0)
    plate = c.states()[2].plate_V
    c.switch(Switches(charge=CHARGE_NONE, bleed=False, connected=False))
    c.switch(Switches(connected=False))
    c.period()
    c.switch(Switches(charge=CHARGE_NONE, bleed=False, connected=False))
    c.switch(Switches(charge=CHARGE_NONE, bleed=False))
    across = c.states()[0]
    # 2 pF of empty clips and the 10 pF of wiring (in series with the cable's 100 pF) share with 100 pF
    side = 10e-12 * 100e-12 / 110e-12
    assert across == pytest.approx(plate * 100.0 / (102.0 + side * 1e12), rel=1e-3)


@pytest.mark.parametrize("shunt", [0, 1, 2])
def test_the_clamp_holds_the_low_node_while_the_bleed_pulls_and_lets_go_after(shunt):
    c = charged(circuit(4.7e-6), 630.0, periods=4000)
    c.switch(Switches(shunt=shunt))
    for _ in range(2):
        c.period()
        assert -5.7 < c.low_mean < -5.0  # 57 mA through both bleeds and 10 ohm of clamp
    for _ in range(400):
        c.period()
    assert abs(c.low_mean) < 4.9 and c.contacts == Switches(shunt=shunt)


def test_halving_the_step_quarters_the_error_of_a_superlinear_part():
    def volts_after(parts: int) -> float:
        c = circuit()
        c.fit(values(), PowerLaw(Superlinear(300.0, 2.7e7, 6.0)), Plates(0.0, []))
        c.switch(CHARGING)
        c.set_slope(1e4)
        for _ in range(8):
            c.period([(PERIOD_S * k / parts, CHARGING) for k in range(1, parts)])
        return c.states()[0]

    best = volts_after(64)
    errors = [abs(volts_after(n) - best) for n in (1, 2, 4, 8)]
    ratios = [a / b for a, b in pairwise(errors)]
    assert all(3.3 < ratio < 4.8 for ratio in ratios), (errors, ratios)


def test_a_branch_far_steeper_than_the_step_stays_stable_and_finds_its_balance():
    c = circuit(1e-9)
    branch = PowerLaw(Superlinear(100.0, 1e5, 25.0))
    c.fit(values(1e-9), branch, Plates(0.0, []))
    charged(c, 600.0, periods=60)
    across, low, _ = c.states()
    amps = (600.0 - across - low) / 4e5 - (across + low) / 100.1e6
    assert branch.current(across) == pytest.approx(amps, rel=1e-3)
    assert c.low_mean == pytest.approx(560.0 * amps, rel=1e-3)


def test_a_copy_taken_as_json_goes_on_with_the_same_digits():
    c = charged(circuit(ohm=1e9), 300.0)
    kept = json.loads(json.dumps(c.state()))
    twin = circuit(ohm=1e9)
    twin.load(kept, values(ohm=1e9), None)
    for _ in range(50):
        c.period()
        twin.period()
        assert (c.high_mean, c.low_mean) == (twin.high_mean, twin.low_mean)


def test_a_leak_far_above_everything_else_keeps_its_own_digits_over_a_long_hold():
    c = charged(circuit(10e-6, 1e12), 600.0, periods=40000)
    c.switch(CHARGING._replace(shunt=2))
    for _ in range(20000):
        c.period()
    across, _, _ = c.states()
    assert c.low_mean / 1e6 == pytest.approx(across * (1e-12 + 1e-12 + 1e-16), rel=1e-4)
