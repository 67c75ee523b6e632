"""Every kind of fault shows where it should, and is gone when it is over."""

from __future__ import annotations

from pathlib import Path

import pytest

from dwellbench.emulator.faults import KINDS
from dwellbench.emulator.reference import bits
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.world import CAUSE_POWER, CAUSE_RESET, NO_CODE, World

IN, OUT = bits("inputs"), bits("outputs")
PART, SUPPLY, THERMISTOR, REF_A, SHUNT, REF_B = 0, 2, 4, 6, 8, 10
CHARGE = OUT["charge"] | OUT["bleed_open"]
HIGH = CHARGE | OUT["low_open"]


def world(kind: str, more: str = "", at_s: float = 1.0, for_s: float | None = 0.5) -> World:
    span = "" if for_s is None else f"for_s = {for_s}\n"
    text = f"""
[[part]]
capacitance_F = 47e-9
[front_end]
ideal = true
[[fault]]
kind = "{kind}"
run = 0
at_s = {at_s}
{span}{more}"""
    return World(Scenario.parse(text), 5)


def go(
    w: World, seconds: float, outputs: int = 0, mv: int = 0, conv: tuple[int, int] = (PART, SHUNT)
) -> World:
    for _ in range(round(seconds / 0.005)):
        w.period(outputs, mv, int(mv > 0), 1, *conv)
    return w


def volts(w: World) -> float:
    return w.codes[0] * 1.024 / 32768 * 1001


def before_during_after(w: World, look, outputs: int = 0, mv: int = 0, conv=(PART, SHUNT)) -> list:
    """`look` at 0.9, 1.4 and 2.4 s, the fault being on from 1.0 to 1.5 s."""
    seen = []
    for seconds in (0.9, 0.5, 1.0):
        go(w, seconds, outputs, mv, conv)
        seen.append(look(w))
    return seen


def bit(name: str):
    return lambda w: bool(w.inputs & IN[name])


def supply_V(w: World) -> int:
    return round(w.truth.supply_V)


def clipped(w: World) -> bool:
    return w.codes[0] == 32767


def halved(w: World) -> bool:
    return 140.0 < volts(w) < 160.0


LEVELS = [  # kind, own keys, outputs, setting, what to look at, what is seen before, during, after
    ("lid_open", "", 0, 0, bit("lid_a"), [True, False, True]),
    ("lid_open", "", 0, 0, bit("lid_b"), [False, True, False]),
    ("stop_pressed", "", 0, 0, bit("stop"), [False, True, False]),
    ("lid_switch_stuck", 'which = "b"\nlevel = "open"\n', 0, 0, bit("lid_b"), [False, True, False]),
    ("lock_fails", 'position = "open"\n', 0, 0, bit("locked"), [True, False, True]),
    ("detector_stuck", "level = 1\n", 0, 0, bit("hv"), [False, True, False]),
    ("detector_stuck", "", CHARGE, 300_000, bit("hv"), [True, False, True]),
    ("converter_silent", "unit = 0\n", 0, 0, lambda w: w.codes[0] == NO_CODE, [False, True, False]),
    ("converter_silent", "unit = 1\n", 0, 0, lambda w: w.codes[1] == NO_CODE, [False, True, False]),
    ("converter_stuck", "unit = 1\ncode = 77\n", 0, 0, lambda w: w.codes[1], [0, 77, 0]),
    ("controller_hung", "", 0, 0, lambda w: w.controller_hung, [False, True, False]),
    ("link_silent", "", 0, 0, lambda w: w.link_silent, [False, True, False]),
    ("supply_dead", "", CHARGE, 300_000, lambda w: w.truth.supply_V > 299.0, [True, False, True]),
    ("supply_overvoltage", "by_V = 60.0\n", CHARGE, 300_000, supply_V, [300, 360, 300]),
    ("charge_relay_dead", "", CHARGE, 300_000, lambda w: w.truth.node_V > 290.0, [True, False, True]),
    ("part_opens", "", CHARGE, 300_000, lambda w: w.truth.connected, [True, False, True]),
    ("divider_open", "", CHARGE, 300_000, lambda w: volts(w) > 290.0, [True, False, True]),
    ("divider_open", 'leg = "bottom"\n', CHARGE, 300_000, clipped, [False, True, False]),
    ("divider_off", "factor = 0.5\n", CHARGE, 300_000, halved, [False, True, False]),
]  # fmt: skip


@pytest.mark.parametrize(("kind", "more", "outputs", "mv", "look", "seen"), LEVELS, ids=lambda v: str(v)[:18])
def test_it_shows_while_it_is_on_and_not_after(kind, more, outputs, mv, look, seen):
    assert before_during_after(world(kind, more), look, outputs, mv) == seen


def test_references_and_thermistor():
    for unit, conv in ((0, (REF_A, SHUNT)), (1, (PART, REF_B))):
        w = world("reference_off", f"unit = {unit}\nfraction = 0.1\n")
        assert before_during_after(w, lambda w, unit=unit: w.codes[unit], conv=conv) == [6400, 7040, 6400]
    thermistor = (THERMISTOR, SHUNT)
    first, hot, late = before_during_after(
        world("over_temperature", "over_s = 0.2\n"), lambda w: w.codes[0], conv=thermistor
    )
    assert hot < 0.3 * first and first > 16000 and late == first
    assert before_during_after(world("thermistor_open"), lambda w: w.codes[0] > 31900, conv=thermistor) == [
        False,
        True,
        False,
    ]
    assert before_during_after(world("thermistor_shorted"), lambda w: w.codes[0] == 0, conv=thermistor) == [
        False,
        True,
        False,
    ]


def fall(kind: str, more: str = "", outputs: int = 0) -> float:
    """Volts left of 300 V on 1 uF 30 ms after the supply is off and `outputs` stand, the fault on
    throughout."""
    text = "[[part]]\ncapacitance_F = 1e-6\n[front_end]\nideal = true\n"
    text += f'[[fault]]\nkind = "{kind}"\nrun = 0\nat_s = 3.0\n{more}'
    w = World(Scenario.parse(text), 5)
    go(w, 4.0, CHARGE, 300_000)
    return go(w, 0.03, outputs).truth.part_V


def test_bleeds_and_charge_relay():
    sound = fall("link_silent")  # both bleeds: 11 ms
    one = fall("bleed_open")
    assert sound < 50.0 < one < 140.0
    assert one == pytest.approx(fall("bleed_open", "which = 2\n"), rel=0.3)
    assert fall("bleed_relay_stuck") == pytest.approx(one, rel=0.3)
    welded = fall(
        "charge_relay_welded"
    )  # first bleed alone: the second is behind the welded relay's other side
    assert 60.0 < welded < 140.0
    assert fall("bleed_welded", outputs=OUT["bleed_open"]) < 140.0  # part two open
    w = world("bleed_welded", for_s=None)
    assert go(go(w, 1.5), 1.0, CHARGE, 100_000).truth.node_V == pytest.approx(100.0 * 22 / 422, rel=0.01)
    w = world("charge_path_open", for_s=None)
    assert go(go(w, 1.5), 1.0, CHARGE, 100_000).truth.node_V == pytest.approx(0.0, abs=0.1)


def test_supply_faults():
    def left_on(kind: str, more: str = "") -> float:
        w = go(world(kind, more, for_s=None), 1.5, CHARGE, 300_000)
        return go(w, 1.0).truth.supply_V

    assert left_on("link_silent") < 1.0
    assert left_on("supply_stuck_on") == pytest.approx(300.0)
    assert left_on("supply_stuck_on", "volts = 420.0\n") == pytest.approx(420.0)
    w = go(world("enable_stuck", for_s=None), 1.5, CHARGE, 300_000)
    for _ in range(100):
        w.period(CHARGE, 300_000, 0, 1, -1, -1)  # setting stays, pumping stops
    assert w.truth.supply_on and w.truth.supply_V == pytest.approx(300.0)
    w = go(world("supply_drift", "V_per_s = 2.0\n"), 2.0, CHARGE, 300_000)
    assert w.truth.supply_V == pytest.approx(301.0, abs=0.05)


def test_even_a_supply_stuck_on_loses_its_wiring_with_the_lid():
    text = '[[part]]\ncapacitance_F = 1e-6\n[[fault]]\nkind = "supply_stuck_on"\nat_s = 0.5\n'
    text += '[[fault]]\nkind = "lid_open"\nat_s = 1.0\n'
    w = go(World(Scenario.parse(text), 5), 1.2, CHARGE, 300_000)
    assert not w.truth.supply_on


def test_faults_of_the_part_and_the_fixture():
    def amps(kind: str, more: str = "") -> float:
        w = go(world(kind, more, for_s=None), 2.5, CHARGE | OUT["low_open"] | OUT["mid_shunt"], 10_000)
        return w.codes[1] * 1.024 / 32768 / 1e5

    assert amps("link_silent") == pytest.approx(0.0, abs=4e-10)
    assert amps("part_leaks", "ohm = 1e7\n") == pytest.approx(10.0 / (1e7 + 5e5), rel=0.01)
    assert amps("fixture_dirty", "ohm = 1e8\n") == pytest.approx(10.0 / 1.005e8, rel=0.02)
    w = go(world("part_shorts", "ohm = 50.0\n"), 1.3, CHARGE, 600_000)
    assert w.truth.node_V == pytest.approx(1.5e-3 * 610, rel=0.01)
    assert w.codes[1] == pytest.approx(600 / 400610 * 560 / 1.024 * 32768, rel=0.001)


def test_shunt_relays():
    def mean_volts(kind: str, more: str, outputs: int) -> float:
        w = go(world(kind, more + "\n", for_s=None), 1.2, outputs, 1_000)
        w.part.fault_S = 1e-7  # 10 Mohm
        return go(w, 0.5, outputs, 1_000).codes[1] * 1.024 / 32768

    low, mid = OUT["low_open"], OUT["mid_shunt"]
    sound = mean_volts("link_silent", "", CHARGE | low)
    assert sound == pytest.approx(1e6 / 11.4e6, rel=0.01)
    assert mean_volts("shunt_relay_stuck", 'position = "rest"', CHARGE | low) < 1e-3
    assert mean_volts("shunt_relay_stuck", 'position = "work"', CHARGE) == pytest.approx(sound, rel=0.01)
    stuck = mean_volts("shunt_relay_stuck", 'which = "mid"\nposition = "work"', CHARGE | low)
    assert stuck == pytest.approx(mean_volts("link_silent", "", CHARGE | low | mid), rel=0.01)


def test_controller_reset_and_loss_of_power():
    w = go(world("controller_reset"), 1.2)
    assert w.take_reset() == CAUSE_RESET and w.take_reset() == -1
    w = go(world("power_lost"), 1.2, CHARGE, 300_000)
    truth = w.truth
    assert w.controller_hung and not truth.supply_on and truth.bleeding and truth.bolt_closed
    assert w.codes == [NO_CODE, NO_CODE]
    go(w, 0.4)
    assert not w.controller_hung and w.take_reset() == CAUSE_POWER
    assert w.clock_ms() < 200


def test_faults_of_one_part_end_when_it_is_taken_out():
    text = """
[operator]
handling_s = 1.0
[[part]]
capacitance_F = 1e-8
[[part]]
capacitance_F = 2e-8
[[fault]]
kind = "part_shorts"
at_s = 0.5
"""
    w = go(World(Scenario.parse(text), 5), 1.0, CHARGE, 100_000)
    assert w.truth.leakage_A > 0.0 and w.part.fault_S > 0.0
    go(w, 3.0, OUT["release"])
    assert w.truth.part_index == 1 and w.part.fault_S == 0.0


def test_a_fault_waits_for_its_run():
    w = World(
        Scenario.parse('[[part]]\ncapacitance_F=1e-8\n[[fault]]\nkind="stop_pressed"\nrun=2\nat_s=0.1\n'), 5
    )
    w.run_began()
    go(w, 0.5)
    assert not w.inputs & IN["stop"]
    w.run_began()
    go(w, 0.05)
    assert not w.inputs & IN["stop"]
    go(w, 0.1)
    assert w.inputs & IN["stop"]


def test_every_kind_is_tried_here():
    tried = Path(__file__).read_text("utf-8")
    elsewhere = {"clock_wrap", "clock_jump"}  # test_world.py
    assert all(f'"{kind}"' in tried for kind in set(KINDS) - elsewhere)
