"""What parts do in the circuit and what they remember."""

from __future__ import annotations

import pytest

from dwellbench.emulator.circuit_state import Plates
from dwellbench.emulator.forming import Forming, Oxide
from dwellbench.emulator.network import Values
from dwellbench.emulator.part_spec import Intermittent, LateLeak, PartSpec, Superlinear
from dwellbench.emulator.parts import Fitted, PowerLaw, Sum

BOX = Values(4e5, (22e3, 22e3), 100.1e6, 100.1e6, (560.0, 1e5, 1e6), 1e12, 1e-12, 0.0, 1e15, ())
OLD = Forming(formed_V=250.0, limit_V=500.0, cracks_A=2e-5)


def test_the_power_law_is_the_one_stated_and_odd():
    law = PowerLaw(Superlinear(at_V=300.0, ohm_there=2.7e7, exponent=6.0))
    assert law.current(300.0) == pytest.approx(300.0 / 2.7e7)
    assert law.current(600.0) == pytest.approx(64.0 * 300.0 / 2.7e7)
    assert law.current(-600.0) == -law.current(600.0)
    assert law.slope(600.0) == pytest.approx((law.current(600.5) - law.current(599.5)), rel=1e-4)


def test_the_ladder_has_the_stated_time_constants_and_shares():
    part = Fitted(PartSpec(capacitance_F=47e-9, absorption=((0.1, 0.0008), (10.0, 0.002))))
    ladder = part.values(BOX).ladder
    assert [ohm * farad for ohm, farad in ladder] == pytest.approx([0.1, 10.0])
    assert [farad / 47e-9 for _, farad in ladder] == pytest.approx([0.0008, 0.002])


@pytest.mark.parametrize("volts", [20.0, 200.0, 260.0, -0.7])
def test_the_oxide_s_slope_is_the_derivative_of_its_current(volts):
    oxide = Oxide(OLD)
    step = 1e-4 * abs(volts)
    measured = (oxide.current(volts + step) - oxide.current(volts - step)) / (2 * step)
    assert oxide.slope(volts) == pytest.approx(measured, rel=1e-4)


def test_oxide_grows_by_the_charge_that_leaks_and_leaks_less_for_it():
    oxide = Oxide(Forming(formed_V=250.0, limit_V=500.0))
    before = oxide.current(250.0)
    coulomb = 0.0
    for _ in range(2000):
        coulomb += oxide.current(250.0) * 0.1
        oxide.grow(250.0, 0.1)
    assert oxide.formed_V - 250.0 == pytest.approx(coulomb / 2e-4, rel=0.01)
    assert oxide.current(250.0) < 0.5 * before


def test_oxide_does_not_grow_beyond_its_limit():
    oxide = Oxide(Forming(formed_V=250.0, limit_V=260.0))
    for _ in range(20000):
        oxide.grow(300.0, 0.1)
    assert 259.0 < oxide.formed_V < 261.0


def test_fresh_oxide_is_lost_without_voltage_and_kept_once_set():
    hasty, patient = Oxide(OLD), Oxide(OLD)
    for _ in range(600):
        hasty.grow(260.0, 0.1)
    for _ in range(600):
        patient.grow(260.0, 0.1)
    for _ in range(36000):
        patient.grow(200.0, 1.0)  # holds: sets
    gained = hasty.formed_V - 250.0
    hasty.rest(7200.0)
    patient.rest(7200.0)
    assert hasty.formed_V - 250.0 < 0.45 * gained
    assert patient.formed_V - 250.0 > 0.95 * gained


def test_cracks_heal_by_their_own_charge():
    oxide = Oxide(OLD)
    first = oxide.current(100.0)
    for _ in range(3000):
        oxide.grow(100.0, 0.1)
    assert oxide.current(100.0) < 0.9 * first
    assert oxide.crack_C > 0.0


def test_backwards_it_conducts_a_milliampere_at_a_volt_and_a_half():
    part = Fitted(PartSpec(capacitance_F=22e-6, forming=OLD, reversed=True))
    assert isinstance(part.branch, Sum)
    assert part.branch.current(1.5) == pytest.approx(1e-3)
    assert part.branch.slope(1.5) > 0.0
    assert part.branch.current(-100.0) < 0.0


def test_a_part_taken_out_and_shorted_keeps_its_slow_absorption_only():
    part = Fitted(PartSpec(capacitance_F=1e-6, absorption=((0.1, 0.01), (1000.0, 0.01))))
    part.plates = Plates(400.0, [400.0, 400.0])
    part.lie_shorted(20.0)
    assert part.plates.plate_V == 0.0
    assert part.plates.ladder_V[0] < 1e-6
    assert part.plates.ladder_V[1] == pytest.approx(392.0, rel=1e-3)


def test_what_hangs_in_the_circuit_follows_the_flaws():
    assert not Fitted(PartSpec(open_lead=True)).link.connected
    assert Fitted(PartSpec(short_ohm=220.0)).link.extra_S == pytest.approx(1 / 220.0)
    late = Fitted(PartSpec(capacitance_F=1e-8, late_leak=LateLeak(after_s=30.0, ohm=1e7)))
    assert late.link.extra_S == 0.0
    late.stressed_s = 30.0
    assert late.link.extra_S == pytest.approx(1e-7)
    loose = Fitted(PartSpec(capacitance_F=1e-8, intermittent=Intermittent("lead")))
    leaky = Fitted(PartSpec(capacitance_F=1e-8, intermittent=Intermittent("leak", ohm=1e6)))
    for part in (loose, leaky):
        assert part.link.connected and part.link.extra_S == 0.0
        part.flaw_on = True
    assert not loose.link.connected
    assert leaky.link.connected and leaky.link.extra_S == pytest.approx(1e-6)


def test_energy_and_charge_count_the_ladder():
    part = Fitted(PartSpec(capacitance_F=1e-6, absorption=((1.0, 0.1),)))
    joule, coulomb = part.stored(Plates(100.0, [50.0]))
    assert joule == pytest.approx(0.5e-6 * 1e4 + 0.5e-7 * 2500)
    assert coulomb == pytest.approx(1e-4 + 5e-6)
