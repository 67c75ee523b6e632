"""Plans: which voltage, for how long, and what is refused before anything is asked of a box."""

from __future__ import annotations

import pytest

from dwellbench.errors import UsageError
from dwellbench.limits.place import Place
from dwellbench.part import Part
from dwellbench.plan import Plan, Ratings

BOX = Ratings()
FILM = Part("47n 630V film", capacitance_F=47e-9, rated_V=630.0, rated_kind="dc", dielectric="film")
HIGH = Part("10n 1600V film", capacitance_F=10e-9, rated_V=1600.0, rated_kind="dc", dielectric="film")
MAINS = Part("100n 275VAC film", capacitance_F=100e-9, rated_V=275.0, rated_kind="ac", dielectric="film")
CAN = Part(
    "22uF 450V", capacitance_F=22e-6, rated_V=450.0, rated_kind="dc", dielectric="electrolytic", polar=True
)
BARE = Part("47n", capacitance_F=47e-9)
COUPLING = Place.parse("coupling@310V/470k")


@pytest.mark.parametrize(
    ("part", "place", "volts", "target"),
    [
        (FILM, None, None, 630.0),
        (FILM, COUPLING, None, 310.0),
        (FILM, Place.parse("coupling"), None, 630.0),
        (FILM, COUPLING, 400.0, 400.0),
        (HIGH, None, None, 650.0),
        (HIGH, COUPLING, None, 310.0),
        (MAINS, None, 400.0, 400.0),
        (MAINS, COUPLING, None, 310.0),
        (BARE, None, 100.0, 100.0),
        (BARE, Place.parse("avc"), None, 50.0),
        (CAN, None, None, 450.0),
    ],
)
def test_the_voltage(part: Part, place: Place | None, volts: float | None, target: float) -> None:
    plan = Plan.make(part, place, BOX, volts=volts)
    assert plan.volts_V == target
    assert f"{target:g} V" in plan.explain()[0]


@pytest.mark.parametrize(
    ("part", "place", "volts", "word"),
    [
        (HIGH, Place.parse("coupling@800V"), None, "above this box"),
        (FILM, None, 651.0, "above this box"),
        (FILM, None, 640.0, "above the part's rating"),
        (CAN, Place.parse("supply_filter@500V"), None, "above the part's rating"),
        (MAINS, None, None, "AC rating"),
        (BARE, None, None, "No voltage rating"),
        (BARE, Place.parse("supply_filter"), None, "No voltage rating"),
        (BARE, Place.parse("buffer"), None, "No voltage rating"),
        (FILM, None, 0.5, "no test voltage"),
        (FILM, None, float("nan"), "no test voltage"),
        (FILM, None, float("inf"), "no test voltage"),
    ],
)
def test_what_is_refused(part: Part, place: Place | None, volts: float | None, word: str) -> None:
    with pytest.raises(UsageError, match=word) as caught:
        Plan.make(part, place, BOX, volts=volts)
    assert caught.value.remedy


@pytest.mark.parametrize(
    ("dwell", "grade"), [(0.1, "new"), (3601.0, "new"), (60.0, "ancient"), (float("nan"), "new")]
)
def test_times_and_grades_that_are_none(dwell: float, grade: str) -> None:
    with pytest.raises(UsageError):
        Plan.make(FILM, None, BOX, dwell=dwell, grade=grade)


@pytest.mark.parametrize(
    ("part", "grade", "dwell", "bleed"),
    [
        (FILM, "new", 60.0, 10.0),
        (CAN, "new", 120.0, 12.0),
        (CAN, "period", 300.0, 30.0),
        (CAN, "aged", 300.0, 30.0),
    ],
)
def test_usual_times(part: Part, grade: str, dwell: float, bleed: float) -> None:
    plan = Plan.make(part, None, BOX, grade=grade)
    assert (plan.dwell_s, plan.bleed_s) == (dwell, bleed)


def test_a_stricter_box_gets_a_lower_voltage() -> None:
    strict = Ratings.from_hello(
        {"volts_mv": 300000, "energy_mj": 10000, "capacitance_nf": 100000, "dwell_ms": 30000}
    )
    assert strict == Ratings(300.0, 10.0, 100e-6, 30.0)
    plan = Plan.make(FILM, None, strict)
    assert plan.volts_V == 300.0
    assert plan.dwell_s == 30.0
    with pytest.raises(UsageError, match="above this box"):
        Plan.make(FILM, COUPLING, strict)


def test_the_wire_has_whole_numbers() -> None:
    wire = Plan.make(CAN, None, BOX, dwell=90.5, recovery=20.0, run_key="abc").to_wire()
    assert wire == {
        "run_key": "abc",
        "volts_mv": 450000,
        "dwell_ms": 90500,
        "expect_pf": 22000000,
        "low_pct": 80,
        "high_pct": 200,
        "polar": True,
        "ceiling_ua": 0,
        "bleed_ms": 10000,
        "recovery_ms": 20000,
        "nudge": True,
    }
    assert all(type(value) in (int, bool, str) for value in wire.values())


def test_run_keys_are_short_and_each_its_own() -> None:
    keys = {Plan.make(FILM, None, BOX).run_key for _ in range(50)}
    assert len(keys) == 50
    assert all(1 <= len(key) <= 16 for key in keys)


def test_an_unknown_value_is_not_checked() -> None:
    wire = Plan.make(Part("?", rated_V=400.0, rated_kind="dc"), None, BOX).to_wire()
    assert (wire["expect_pf"], wire["low_pct"], wire["high_pct"]) == (0, 0, 0)


def test_the_plan_tells_what_it_does() -> None:
    told = " ".join(Plan.make(CAN, None, BOX, recovery=10.0).explain())
    for word in ("450 V", "120 s", "bled", "rebound", "polar", "2.23 J", "9.9e+03 uC"):
        assert word in told
    assert 120.0 < Plan.make(CAN, None, BOX).estimate_s() < 400.0
