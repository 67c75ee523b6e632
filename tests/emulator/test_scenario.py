"""Scenarios are read strictly, and what they say arrives."""

from __future__ import annotations

import pytest

from dwellbench.emulator.faults import KINDS
from dwellbench.emulator.scenario import Scenario, packaged
from dwellbench.emulator.trouble import ACTS
from dwellbench.errors import UsageError

WHOLE = """
seed = 7
ambient_C = 25.0
[operator]
handling_s = 12.0
[[part]]
label = "A1"
marking = "47n 630V film"
role = "coupling"
expect = "fit"
capacitance_F = 47e-9
leakage_ohm = 3.0e10
esr_ohm = 0.5
absorption = [[0.1, 0.0008], [1.0, 0.0008], [10.0, 0.0008]]
superlinear = {at_V = 300.0, ohm_there = 2.7e7, exponent = 6.0}
[[part]]
label = "A2"
short_ohm = 220.0
[[part]]
label = "A3"
open_lead = true
initial_V = 0.0
[[part]]
label = "A4"
capacitance_F = 22e-6
[part.forming]
formed_V = 300.0
[[part]]
label = "A1"
[front_end]
charge_ohm = 401e3
[[fault]]
kind = "lid_open"
at_s = 12.0
for_s = 5.0
run = 1
[[fault]]
kind = "part_shorts"
"""


def test_everything_written_arrives():
    s = Scenario.parse(WHOLE)
    assert (s.seed, s.ambient_C, s.operator.handling_s, s.operator.opens_after_s) == (7, 25.0, 12.0, 1.0)
    a1, a2, a3, a4, again = s.parts
    assert (a1.label, a1.marking, a1.role, a1.expect) == ("A1", "47n 630V film", "coupling", "fit")
    assert a1.absorption == ((0.1, 0.0008), (1.0, 0.0008), (10.0, 0.0008))
    assert a1.superlinear is not None and a1.superlinear.exponent == 6.0
    assert a2.short_ohm == 220.0 and a3.open_lead
    assert a4.forming is not None and a4.forming.limit_V == pytest.approx(330.0)
    assert again.same_as == 0 and again.capacitance_F == 47e-9
    assert s.front_end == {"charge_ohm": 401e3}
    lid, short = s.faults
    assert (lid.kind, lid.at_s, lid.for_s, lid.run) == ("lid_open", 12.0, 5.0, 1)
    assert short.more == {"ohm": 50.0} and short.for_s is None


def test_a_repeat_fits_the_same_part_again():
    s = Scenario.parse(
        '[[part]]\nlabel = "A"\ncapacitance_F = 1e-8\nrepeat = 3\n[[part]]\ncapacitance_F = 2e-8\n'
    )
    assert [p.same_as for p in s.parts] == [None, 0, 0, None]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("sead = 1", ["sead", "top level", "seed"]),
        ("seed = 1.5", ["seed", "whole number"]),
        ("seed = true", ["seed", "whole number"]),
        ("ambient_C = nan", ["ambient_C", "finite"]),
        ("[operator]\nhandling = 3", ["[operator]", "handling", "handling_s"]),
        ("[[part]]\ncapacitance = 1e-9", ["[[part]] 1", "capacitance", "capacitance_F"]),
        ("[[part]]\ncapacitance_F = -1e-9", ["capacitance_F", "above 0"]),
        ("[[part]]\nlabel = 'x'", ["[[part]] 1", "capacitance"]),
        ("[[part]]\nshort_ohm = 1.0\nopen_lead = true", ["[[part]] 1", "shorted and open"]),
        ("[[part]]\ncapacitance_F = 1e-6\nreversed = true", ["reversed", "forming"]),
        ("[[part]]\ncapacitance_F = 1e-6\nabsorption = [[1.0]]", ["absorption", "2 numbers"]),
        ("[[part]]\ncapacitance_F = 1e-6\nabsorption = [[1.0, 2.0]]", ["absorption", "share"]),
        ("[[part]]\ncapacitance_F = 1e-6\nsuperlinear = {at_V = 10.0}", ["superlinear", "exponent"]),
        ("[[part]]\ncapacitance_F = 1e-6\n[part.forming]\nlimit_V = 9.0", ["forming", "formed_V"]),
        ("[part]\ncapacitance_F = 1e-6", ["[[part]]"]),
        ("[front_end]\nnoise = 1", ["[front_end]", "noise", "noise_code"]),
        ("[front_end]\nnoise_code = 1", ["noise_code", "list of 2"]),
        ("[[fault]]\nkind = 'lid_opens'", ["[[fault]] 1", "lid_opens", "lid_open"]),
        ("[[fault]]\nat_s = 1.0", ["[[fault]] 1", "kind"]),
        ("[[fault]]\nkind = 'lid_open'\nwhich = 'a'", ["which", "[[fault]] 1"]),
        ("[[fault]]\nkind = 'bleed_open'\nwhich = 3", ["which", "one of 1, 2"]),
        ("[[fault]]\nkind = 'clock_wrap'\nrun = 2", ["clock_wrap", "power-up"]),
        ("seed = x\n", ["TOML", "line 1"]),
        ("[[part]]\ncapacitance_F = 1\ncapacitance_F = 2\n", ["line 3"]),
    ],
)
def test_what_is_wrong_is_refused_by_name_and_with_a_remedy(text, words):
    with pytest.raises(UsageError) as caught:
        Scenario.parse(text, source="bad.toml")
    said = caught.value.message + " " + caught.value.remedy
    assert "bad.toml" in caught.value.message and caught.value.remedy
    for word in words:
        assert word in said, (word, said)


def test_packaged_scenarios_are_read_and_named():
    assert {"film", "short", "charged"} <= set(packaged())
    for name in packaged():
        scenario = Scenario.load(name)
        assert scenario.name == name and scenario.parts


def test_a_scenario_that_is_not_there_is_refused_with_what_is(tmp_path):
    with pytest.raises(UsageError) as caught:
        Scenario.load("flim")
    assert "film" in caught.value.remedy
    (tmp_path / "x.toml").write_bytes(b"\xff\xfe")
    with pytest.raises(UsageError):
        Scenario.load(str(tmp_path / "x.toml"))
    (tmp_path / "y.toml").write_text("seed = 3\n")
    assert Scenario.load(str(tmp_path / "y.toml")).seed == 3


def test_every_kind_of_fault_has_its_deed():
    assert set(ACTS) == set(KINDS)


def test_the_kinds_that_scripts_rely_on_are_all_there():
    promised = """lid_open stop_pressed lid_switch_stuck lock_fails charge_relay_welded bleed_open
    bleed_welded shunt_relay_stuck divider_open detector_stuck converter_silent supply_overvoltage
    supply_stuck_on enable_stuck part_shorts part_opens controller_hung controller_reset link_silent
    over_temperature"""
    assert set(promised.split()) <= set(KINDS)
