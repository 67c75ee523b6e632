"""Places and roles: how they are written, what they demand, and that the table is whole."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dwellbench.errors import UsageError
from dwellbench.limits.demands import VISIBLE_OHM, demand, grid_shift_V, least_ohm, most_series_ohm
from dwellbench.limits.place import Place, ohms, short_ohms, volts
from dwellbench.limits.places import BY_ID, FILTER, GRID_SHIFT, KINDS, NEVER, PULSE, SERIES_SHARE
from dwellbench.part import Part

FILM = Part("made", capacitance_F=1e-7, rated_V=630.0, rated_kind="dc", dielectric="film")
CAN = Part("made", capacitance_F=20e-6, rated_V=450.0, rated_kind="dc", dielectric="electrolytic", polar=True)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("470k", 470e3),
        ("4k7", 4700.0),
        ("2.2M", 2.2e6),
        ("2M2", 2.2e6),
        ("470000", 470e3),
        ("1Mohm", 1e6),
        ("100R", 100.0),
        ("1G", 1e9),
    ],
)
def test_resistances(text: str, value: float) -> None:
    assert ohms(text) == pytest.approx(value)


@pytest.mark.parametrize("text", ["", "k", "4.7k7", "47 7", "-1k", "0", "1e3", "470q", "99999T"])
def test_what_is_no_resistance(text: str) -> None:
    with pytest.raises(ValueError, match="resistance"):
        ohms(text)


@given(st.floats(1.0, 9.9e11))
def test_a_resistance_is_read_as_it_is_written(value: float) -> None:
    assert ohms(short_ohms(value)) == pytest.approx(value, rel=1e-9)


@pytest.mark.parametrize(
    ("text", "value"), [("310V", 310.0), ("310", 310.0), ("12.5 v", 12.5), ("400VDC", 400.0)]
)
def test_voltages(text: str, value: float) -> None:
    assert volts(text) == value


@pytest.mark.parametrize(
    ("text", "role", "given_V", "series"),
    [
        ("coupling", "coupling", None, 470e3),
        ("coupling@310V/470k", "coupling@310V/470k", 310.0, 470e3),
        ("coupling@250/1M", "coupling@250V/1M", 250.0, 1e6),
        ("coupling/220k", "coupling/220k", None, 220e3),
        ("AVC", "avc", None, 2e6),
        ("supply_filter@350V", "supply_filter@350V", 350.0, None),
    ],
)
def test_roles(text: str, role: str, given_V: float | None, series: float | None) -> None:
    place = Place.parse(text)
    assert place is not None
    assert (place.role, place.given_V, place.series_ohm) == (role, given_V, series)
    assert Place.parse(place.role) == place


@pytest.mark.parametrize("text", ["any", "ANY", "", "  "])
def test_no_particular_place(text: str) -> None:
    assert Place.parse(text) is None


@pytest.mark.parametrize(
    "text",
    ["cuopling", "coupling@", "coupling@hot", "coupling@310V/470q", "coupling@-5V", "@310V", "coupling@0V"],
)
def test_roles_that_are_none(text: str) -> None:
    with pytest.raises(UsageError) as caught:
        Place.parse(text)
    assert caught.value.remedy


def test_the_table_is_whole() -> None:
    assert len(BY_ID) == len(KINDS)
    for kind in KINDS:
        assert kind.rule in (GRID_SHIFT, SERIES_SHARE, FILTER, NEVER, PULSE)
        assert kind.source
        assert kind.what
        if kind.rule in (GRID_SHIFT, SERIES_SHARE):
            assert kind.volts_V
            assert kind.series_ohm
            assert kind.tolerated


def test_what_is_touched_is_never_fit() -> None:
    never = {kind.id for kind in KINDS if Place(kind).never_fit}
    assert never == {
        *("across_the_line", "line_to_chassis", "chassis_to_negative", "aerial_isolation", "earth_isolation"),
        *("pickup_isolation", "headphone_isolation", "speaker_isolation"),
    }
    assert {kind.id for kind in KINDS if Place(kind).beyond_box} == {"buffer", "plate_to_plate"}
    for name in never:
        assert demand(Place(BY_ID[name]), FILM, 400.0, 25.0, 1e-7) is None
        assert least_ohm(Place(BY_ID[name])) is None


def test_a_demand_is_that_shift_and_no_more() -> None:
    """Insulation of just the least gives just the tolerated shift, and serves just that grid leak."""
    place = Place.parse("coupling@310V/470k")
    assert place is not None
    least = least_ohm(place)
    assert least is not None
    assert grid_shift_V(place, least) == pytest.approx(0.1)
    assert most_series_ohm(place, least) == pytest.approx(470e3)


def test_a_filter_asks_by_the_kind_of_part() -> None:
    place = Place.parse("supply_filter")
    assert place is not None
    can, film = demand(place, CAN, 450.0, 23.0, 20e-6), demand(place, FILM, 450.0, 23.0, 1e-7)
    assert can is not None
    assert film is not None
    assert can.most_A == pytest.approx(1.1e-3)
    assert film.value == VISIBLE_OHM
    assert film.most_A == pytest.approx(450.0 / VISIBLE_OHM)


def test_a_demand_needs_a_voltage() -> None:
    place = Place.parse("coupling")
    assert place is not None
    assert demand(place, FILM, 0.0, 23.0, 1e-7) is None
    assert grid_shift_V(Place(BY_ID["avc"]), 1e9) is None
    assert most_series_ohm(Place(BY_ID["avc"]), 40e6) == pytest.approx(2e6)
