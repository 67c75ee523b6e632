"""Limits against figures that others published: worked examples, tables, catalogue lines. The source stands at each."""

from __future__ import annotations

import pytest

from dwellbench.limits.demands import demand, grid_shift_V, least_ohm
from dwellbench.limits.limit import INSULATION, Limit, at_most_A
from dwellbench.limits.place import Place
from dwellbench.limits.table import LIMITS, limits_for
from dwellbench.limits.temperature import warmed
from dwellbench.part import Part

BY_ID = {limit.id: limit for limit in LIMITS}


def electrolytic(microfarads: float, rated_V: float) -> Part:
    return Part(
        "made",
        capacitance_F=microfarads * 1e-6,
        rated_V=rated_V,
        rated_kind="dc",
        dielectric="electrolytic",
        polar=True,
    )


def ruling(part: Part, grade: str) -> Limit:
    return limits_for(part, part.capacitance_F, grade)[0][0]


def amperes(part: Part, grade: str) -> float:
    assert part.capacitance_F is not None
    return ruling(part, grade).value(part.capacitance_F, part.rated_V)


def test_aluminium_new() -> None:
    """2200 uF 35 V: 770 uA at 2 min and 20 C (chemi-con.co.jp, FAQ on time-based changes in leakage current)."""
    assert amperes(electrolytic(2200, 35), "new") == pytest.approx(770e-6)
    assert ruling(electrolytic(2200, 35), "new").time_s == 120.0


def test_whichever_is_greater_is_not_plus() -> None:
    """C V = 100: max(0.01 C V, 3) is 3 uA, where "0.01 C V + 3" would be 4 uA. Both spellings occur in makers' sheets."""
    assert amperes(electrolytic(1, 100), "new") == pytest.approx(3e-6)


def test_one_catalogue_line() -> None:
    """2.2 uF 250 V: 21 uA (KEMET ESL225M250, catalogue line)."""
    assert BY_ID["al_high_volt"].value(2.2e-6, 250.0) == pytest.approx(21e-6)


@pytest.mark.parametrize(("microfarads", "rated_V", "milliamperes"), [(20, 450, 1.1), (20, 250, 0.7)])
def test_jan_c_62(microfarads: float, rated_V: float, milliamperes: float) -> None:
    """Worked examples of JAN-C-62 in amradio mailing list, message 21215."""
    assert amperes(electrolytic(microfarads, rated_V), "period") == pytest.approx(milliamperes * 1e-3)


@pytest.mark.parametrize(
    ("rated_V", "k"),
    [
        (3, 0.01),
        (100, 0.01),
        (101, 0.02),
        (250, 0.02),
        (251, 0.025),
        (350, 0.025),
        (351, 0.04),
        (450, 0.04),
        (500, 0.04),
    ],
)
def test_jan_c_62_steps(rated_V: float, k: float) -> None:
    """The k table, repeated in a restorers' mailing list of 1999, there written to 500 V."""
    assert amperes(electrolytic(10, rated_V), "period") == pytest.approx((k * 10 + 0.3) * 1e-3)


def test_aged_is_twice_new() -> None:
    """After the shelf test of IEC 60384-4 twice the limit (Vishay sheets 28375, 28327, 28340)."""
    part = electrolytic(22, 450)
    assert amperes(part, "aged") == pytest.approx(2 * amperes(part, "new"))


def test_a_sound_part_of_trade_practice() -> None:
    """A sound new 4.7 uF 450 V may leak 13 uA at half its rating; the usual formula allows 21 uA. Common practice, no source."""
    assert amperes(electrolytic(4.7, 450), "new") == pytest.approx(21.15e-6)
    assert amperes(electrolytic(4.7, 450), "new") > 13e-6


def film(kind: str, microfarads: float) -> Part:
    return Part("made", capacitance_F=microfarads * 1e-6, rated_V=630.0, rated_kind="dc", dielectric=kind)


def ohms(limit: str, microfarads: float) -> float:
    return BY_ID[limit].value(microfarads * 1e-6, 630.0)


@pytest.mark.parametrize(("microfarads", "gigaohm"), [(0.01, 100.0), (0.3, 100.0), (1.0, 30.0), (10.0, 3.0)])
def test_polypropylene(microfarads: float, gigaohm: float) -> None:
    """100 Gohm to 0.33 uF, 30 000 s above (KEMET R41, EPCOS B32921)."""
    assert ohms("pp_new", microfarads) == pytest.approx(gigaohm * 1e9)
    assert ruling(film("polypropylene", microfarads), "new").id == "pp_new"


def test_after_damp_heat_half_is_left() -> None:
    """At least 50 % of the delivered minimum after 56 d at 40 C, 93 % (KEMET, EPCOS, Vishay sheets)."""
    assert ohms("pp_aged", 0.1) == pytest.approx(0.5 * ohms("pp_new", 0.1))
    assert ohms("pp_aged", 4.7) == pytest.approx(0.5 * ohms("pp_new", 4.7))


def test_five_gigaohm_miss_the_series_and_serve_the_place() -> None:
    """5 Gohm: a twentieth of the polypropylene limit, and 0.0235 V on a 470 kohm grid from 250 V (voltage divider)."""
    assert ohms("pp_new", 0.047) / 5e9 == pytest.approx(20.0)
    place = Place.parse("coupling@250V/470k")
    assert place is not None
    assert grid_shift_V(place, 5e9) == pytest.approx(0.0235, abs=5e-5)


@pytest.mark.parametrize(("microfarads", "megohm"), [(0.1, 1000.0), (0.001, 10000.0), (1.0, 100.0)])
def test_ceramic_whichever_is_less(microfarads: float, megohm: float) -> None:
    """min(10 Gohm, 100 Mohm uF): 0.1 uF needs 1000 Mohm (worked example of a 16 V part, product.tdk.com, FAQ)."""
    assert ohms("ceramic_new", microfarads) == pytest.approx(megohm * 1e6)


@pytest.mark.parametrize(
    ("leak", "rows"),
    [
        (10e6, (5.382, 11.223, 11.905, 22.727)),
        (50e6, (1.095, 2.328, 2.475, 4.902)),
        (100e6, (0.549, 1.170, 1.244, 2.475)),
        (250e6, (0.220, 0.469, 0.499, 0.996)),
        (500e6, (0.110, 0.235, 0.250, 0.499)),
        (1e9, (0.055, 0.117, 0.125, 0.250)),
        (5e9, (0.011, 0.0235, 0.025, 0.050)),
    ],
)
def test_grid_shift(leak: float, rows: tuple[float, ...]) -> None:
    """Vg = Va Rg / (Rg + R) from 250 V: arithmetic, for grid leaks of 220 k, 470 k, 500 k, 1 M."""
    for text, volts in zip(("220k", "470k", "500k", "1M"), rows, strict=True):
        place = Place.parse(f"coupling@250V/{text}")
        assert place is not None
        assert grid_shift_V(place, leak) == pytest.approx(volts, abs=6e-4)


def test_least_insulation_of_a_coupling_capacitor() -> None:
    """250 V, 470 kohm, 0.1 V: 1 174.5 Mohm; arithmetic."""
    place = Place.parse("coupling@250V/470k")
    assert place is not None
    assert least_ohm(place) == pytest.approx(1174.53e6, rel=1e-5)


@pytest.mark.parametrize(("role", "megohm"), [("screen_bypass@250V/100k", 2.0), ("avc@50V/2M", 40.0)])
def test_twenty_times_the_feeding_resistance(role: str, megohm: float) -> None:
    """Screen bypass on 100 k: 2 Mohm; automatic volume control line on 1 M + 1 M: 40 Mohm (Silicon Chip, Vintage Radio, 2003)."""
    place = Place.parse(role)
    assert place is not None
    assert least_ohm(place) == pytest.approx(megohm * 1e6)


def test_that_rule_is_not_enough_for_a_grid() -> None:
    """20 Mohm before a 1 Mohm grid leak still put 11.9 V on the grid from 250 V; arithmetic."""
    place = Place.parse("coupling@250V/1M")
    assert place is not None
    assert grid_shift_V(place, 20e6) == pytest.approx(11.9, abs=0.01)
    least = least_ohm(place)
    assert least is not None
    assert least > 100 * 20e6


def test_warming() -> None:
    """One decade from 25 to 85 C for film, a factor 2 for X7R (table of dielectrics, wima.de); ten times for tantalum
    (component table, tancap.com.cn); a tenth of the insulation at 125 C for mica (CDE guide)."""
    assert warmed("polyester", 25.0, 85.0) == pytest.approx(10.0)
    assert warmed("ceramic_2", 25.0, 85.0) == pytest.approx(2.0)
    assert warmed("tantalum", 25.0, 85.0) == pytest.approx(10.0)
    assert warmed("mica", 25.0, 125.0) == pytest.approx(10.0)
    assert warmed("polypropylene", 25.0, 25.0 + 18.06) == pytest.approx(2.0, abs=1e-3)


def test_a_limit_in_ohms_is_a_current_at_the_voltage_of_the_test() -> None:
    """R >= 100 Gohm at 630 V is I <= 6.3 nA; arithmetic."""
    limit = BY_ID["pp_new"]
    assert limit.quantity == INSULATION
    assert at_most_A(limit, 630.0, 47e-9, 630.0) == pytest.approx(6.3e-9)


def test_a_warm_place_asks_more_of_a_cool_part() -> None:
    place = Place.parse("coupling@250V/470k")
    assert place is not None
    cool = demand(place, film("polyester", 0.047), 250.0, 25.0, 47e-9)
    hot = demand(place, film("polyester", 0.047), 250.0, 45.0, 47e-9)
    assert cool is not None
    assert hot is not None
    assert hot.value == pytest.approx(1174.53e6, rel=1e-5)
    assert cool.value / hot.value == pytest.approx(10 ** (20 / 60))
