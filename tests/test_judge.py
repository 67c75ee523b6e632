"""Verdicts: what each made trace comes to, as new and for places, and what a run that ended early does not claim."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from dwellbench.errors import TraceError, UsageError
from dwellbench.judge import analyse, judge
from dwellbench.judging.case import Case
from dwellbench.limits.decide import Thresholds
from dwellbench.limits.place import Place
from dwellbench.limits.places import KINDS, NEVER
from dwellbench.measure.csv_read import read_csv
from dwellbench.measure.reference import code_names
from dwellbench.measure.trace import Trace
from dwellbench.outcome import NEXTS, QUANTITIES, Outcome
from dwellbench.part import Part
from dwellbench.plan import GRADES

DATA = Path(__file__).parent / "measure" / "data"


def part(kind: str | None, farads: float | None, rated_V: float | None, **more: object) -> Part:
    rated_kind = None if rated_V is None else "dc"
    members = {
        "capacitance_F": farads,
        "rated_V": rated_V,
        "rated_kind": rated_kind,
        "dielectric": kind,
        **more,
    }
    return Part("made", **members)  # type: ignore[arg-type]


FILM = part("film", 47e-9, 630.0)
POLY = part("polypropylene", 47e-9, 630.0)
PAPER = part("paper", 50e-9, 600.0)
CAN = part("electrolytic", 22e-6, 450.0, polar=True)
MICA = part("mica", 100e-12, 500.0)
FILM_100N = part("film", 100e-9, 400.0)


@cache
def trace(name: str) -> Trace:
    return read_csv(DATA / f"{name}.csv")


def ids(outcome: Outcome) -> set[str]:
    return {finding.id for finding in outcome.findings}


@pytest.mark.parametrize(
    ("name", "what", "role", "verdict", "following", "seen"),
    [
        ("film_47n", FILM, "coupling", "fit", "use", set()),
        ("film_47n", FILM, "coupling@310V/470k", "fit", "use", set()),
        ("film_47n", FILM, None, "fit", "use", set()),
        ("film_47n", POLY, None, "unfit", "clean_and_retest", set()),
        ("film_47n", POLY, "coupling", "fit", "use", {"below_series"}),
        ("film_47n", part("film", 47e-9, 1600.0), None, "fit", "use_up_to", set()),
        ("film_47n", part("film", 47e-9, 250.0), "coupling@310V/470k", "unfit", None, set()),
        ("film_47n", part("film", 100e-9, 630.0), None, "unfit", None, {"value_off"}),
        ("film_47n", FILM, "coupling@650V/470k", "unfit", None, set()),
        ("film_47n", part("film", 47e-9, 1600.0), "coupling@800V/470k", "undecided", None, set()),
        ("film_47n", FILM, "buffer", "undecided", "other_place", set()),
        ("film_47n", FILM, "across_the_line", "unfit", "other_place", set()),
        ("paper_2M", PAPER, None, "unfit", "scrap", {"sag"}),
        ("paper_2M", PAPER, "coupling", "unfit", None, {"sag", "below_series"}),
        ("clipped", PAPER, None, "unfit", "scrap", {"clipped", "sag"}),
        ("electrolytic_forming", CAN, None, "undecided", "re_form_then_test", {"forming", "sag"}),
        ("electrolytic_sound", CAN, None, "fit", "check_esr", set()),
        ("electrolytic_sound", CAN, "supply_filter", "fit", "check_esr", set()),
        ("superlinear", part("film", 100e-9, 600.0), None, "unfit", "scrap", set()),
        ("open_lead", FILM, None, "unfit", "clean_and_retest", {"open_lead"}),
        ("open_lead", FILM, "coupling", "unfit", "clean_and_retest", {"open_lead"}),
        ("bursts", FILM_100N, None, "undecided", None, {"intermittent"}),
        ("bursts", part("paper", 100e-9, 400.0), None, "unfit", None, {"intermittent"}),
        ("mica_100p", MICA, None, "fit", "use", set()),
    ],
)
def test_verdicts(
    name: str, what: Part, role: str | None, verdict: str, following: str | None, seen: set[str]
) -> None:
    outcome = analyse(trace(name), what, role)
    assert outcome.verdict == verdict, outcome.reason
    assert seen <= ids(outcome)
    assert outcome.next is None or outcome.next in NEXTS
    if following is not None:
        assert outcome.next == following
    if verdict == "undecided":
        assert outcome.to_decide, "undecided says what would decide it"
    assert outcome.reason


def test_every_kind_of_end_of_a_run_is_known() -> None:
    from dwellbench.judging.ends import _ENDS, MEASURED

    assert set(code_names("ends").values()) == {*_ENDS, *MEASURED}


START = "# {}\nt_s,stage,shunt_ohm,v_part_V,i_shunt_A,v_supply_V\n0.1,zero,560,0,0,0\n0.2,zero,560,0,0,0\n0.3,look,560,1,0,20\n"


def ended(tmp_path: Path, end: str, **header: object) -> Trace:
    """A run that ended before the charge."""
    lines = "\n# ".join(f"{key} = {value}" for key, value in {"end": end, **header}.items())
    path = tmp_path / "ended.csv"
    path.write_text(START.format(lines), encoding="utf-8")
    return read_csv(path)


@pytest.mark.parametrize(
    ("end", "header", "verdict", "following", "seen"),
    [
        ("short", {"short_mv": 187, "short_na": 241000}, "unfit", "scrap", "short"),
        ("short", {}, "unfit", "scrap", "short"),
        ("open", {"look_pf": 1}, "unfit", "clean_and_retest", "open_lead"),
        ("reversed", {"short_mv": 2200}, "undecided", None, "reversed"),
        ("value_off", {"look_pf": 12000}, "unfit", "scrap", "value_off"),
        ("value_off", {"look_pf": 220000}, "undecided", None, "value_off"),
        ("value_off", {}, "undecided", None, "interrupted"),
        ("residual", {"residual_mv": 41000}, "undecided", None, "residual_charge"),
        ("over_energy", {"look_pf": 400000000}, "undecided", None, "value_off"),
        ("aborted", {}, "undecided", None, "interrupted"),
        ("link_lost", {}, "undecided", None, "interrupted"),
        ("fault", {"fault": "lid_open"}, "undecided", None, "fault"),
        ("fault", {"fault": "over_current"}, "unfit", "scrap", "short"),
        ("fault", {"fault": "charge_left"}, "unfit", "scrap", "open_lead"),
        ("fault", {"fault": "charge_timeout"}, "undecided", None, "sag"),
        ("complete", {}, "undecided", None, "interrupted"),
        ("something_new", {}, "undecided", None, "interrupted"),
    ],
)
def test_early_ends(
    tmp_path: Path, end: str, header: dict[str, object], verdict: str, following: str | None, seen: str
) -> None:
    outcome = judge(ended(tmp_path, end, **header), FILM)
    assert (outcome.verdict, outcome.next) == (verdict, following)
    assert ids(outcome) == {seen}
    assert outcome.end == end
    assert not outcome.dwell_complete
    assert all(getattr(outcome, name) is None for name in QUANTITIES), (
        "nothing is claimed that was not measured"
    )
    assert outcome.limits == ()
    assert outcome.suits == ()
    if verdict == "undecided":
        assert outcome.to_decide


@pytest.mark.parametrize(
    ("node_mv", "nanoamps", "says"),
    [
        (187, 241171, "about 215 ohm"),  # 0.187 V / 241 uA is 775 ohm, and the shunt's 560 are not the part's
        (570, 222937, "about 2 kohm"),
        (140, 243497, "less than 128 ohm"),  # a code of the divider is 31 mV
        (0, 243497, "less than 128 ohm"),
    ],
)
def test_a_short_is_told_without_the_shunt_below_it(
    tmp_path: Path, node_mv: int, nanoamps: int, says: str
) -> None:
    outcome = judge(ended(tmp_path, "short", short_mv=node_mv, short_na=nanoamps), FILM)
    assert outcome.findings[0].evidence.endswith(f"flowed: {says}.")


@pytest.mark.parametrize("end", ["aborted", "link_lost", "fault"])
def test_an_interrupted_dwell_is_no_result(end: str) -> None:
    outcome = judge(trace("film_47n"), FILM, end=end)
    assert outcome.verdict == "undecided"
    assert outcome.insulation_ohm is None


def test_a_dead_short_seen_in_the_trace_itself() -> None:
    shorted = trace("film_47n")
    flat = replace(
        shorted, v_part_V=np.full(len(shorted), 1.0), i_shunt_A=np.full(len(shorted), 632.5 / 400e3)
    )
    low = replace(flat, shunt_ohm=np.full(len(shorted), 560.0), range_V=np.full(len(shorted), 1.024))
    outcome = judge(low, FILM)
    assert outcome.verdict == "unfit"
    assert "short" in ids(outcome)
    assert outcome.next == "scrap"


@pytest.mark.parametrize("kind", [kind.id for kind in KINDS if kind.rule == NEVER])
def test_a_place_that_is_touched_is_never_fit(kind: str) -> None:
    for name, what in (("film_47n", FILM), ("mica_100p", MICA), ("film_47n", POLY)):
        outcome = analyse(trace(name), what, kind, thresholds=Thresholds(1e-6, 1e-7))
        assert outcome.verdict == "unfit"
        assert "safety approval" in outcome.reason


def test_no_part_is_sound_without_its_charge_seen() -> None:
    whole = trace("film_47n")
    only_dwell = replace(whole, stage=np.where(whole.stage == "charge", "prove", whole.stage))
    outcome = judge(only_dwell, FILM)
    assert outcome.verdict == "undecided"
    assert outcome.capacitance_F is None
    assert outcome.suits == ()


def test_a_short_dwell_behind_a_slow_shunt_is_no_reading() -> None:
    whole = trace("film_1u_step")
    dwell = np.flatnonzero(whole.stage == "dwell")
    keep = whole.t_s <= whole.t_s[dwell[0]] + 5.0
    cut = Trace(
        **{name: getattr(whole, name)[keep] for name in whole.__dataclass_fields__ if name != "header"},
        header=whole.header,
    )
    outcome = judge(cut, part("polyester", 1e-6, 400.0))
    assert outcome.verdict == "undecided"
    assert "unsettled" in ids(outcome)
    assert outcome.insulation_ohm is None


def test_the_two_answers_are_not_merged() -> None:
    """The series limit stands below the place's, with its own probability, and does not move the verdict."""
    outcome = analyse(trace("film_47n"), POLY, "coupling")
    assert outcome.verdict == "fit"
    assert outcome.limits[0].grade == "place"
    series = next(limit for limit in outcome.limits if limit.id == "pp_new")
    assert series.p_conform is not None
    assert series.p_conform < 0.05


def test_without_a_place_the_places_are_told() -> None:
    outcome = analyse(trace("film_47n"), FILM)
    suits, not_for = {suit.role for suit in outcome.suits}, {suit.role for suit in outcome.not_for}
    assert "coupling" in suits
    assert {"across_the_line", "buffer"} <= not_for
    assert not suits & not_for
    leaky = analyse(trace("paper_2M"), PAPER)
    assert "coupling" in {suit.role for suit in leaky.not_for}
    coupling = next(suit for suit in outcome.suits if suit.role == "coupling")
    assert coupling.series_ohm is not None
    assert coupling.series_ohm > 470e3


def test_a_polar_part_suits_no_grid() -> None:
    outcome = analyse(trace("electrolytic_sound"), CAN)
    assert "supply_filter" in {suit.role for suit in outcome.suits}
    assert "coupling" in {suit.role for suit in outcome.not_for}


def test_a_verdict_holds_up_to_its_voltage() -> None:
    tested = analyse(trace("film_47n"), part("film", 47e-9, 1600.0))
    assert tested.valid_to_V == pytest.approx(630.0, abs=1.0)
    assert "above_V" in tested.not_tested
    assert tested.test_V == pytest.approx(629.95, abs=0.2)
    assert analyse(trace("film_47n"), FILM).valid_to_V == 630.0
    assert "above_V" not in analyse(trace("film_47n"), FILM).not_tested


def test_grid_shift_is_that_of_the_insulation() -> None:
    outcome = analyse(trace("film_47n"), FILM, "coupling@310V/470k")
    assert outcome.grid_shift_V is not None
    assert outcome.insulation_ohm is not None
    assert outcome.insulation_ohm.value is not None
    assert outcome.grid_shift_V.value == pytest.approx(310.0 * 470e3 / outcome.insulation_ohm.value, rel=1e-4)
    assert outcome.grid_shift_V.low is not None
    assert outcome.grid_shift_V.high is not None
    assert outcome.grid_shift_V.low < outcome.grid_shift_V.high
    assert analyse(trace("film_47n"), FILM, "avc").grid_shift_V is None


def test_an_ac_rating_is_not_turned_into_dc() -> None:
    outcome = analyse(trace("film_47n"), replace(FILM, rated_V=275.0, rated_kind="ac"), "coupling@310V/470k")
    assert outcome.verdict == "fit"
    assert all(limit.id != "rated_voltage" for limit in outcome.limits)
    assert any("AC rating" in note for note in outcome.notes)


def test_a_series_resistance_that_was_measured_ends_that_question() -> None:
    outcome = analyse(trace("electrolytic_sound"), CAN, esr_ohm=1.2)
    assert outcome.next == "use"
    assert "esr" not in outcome.not_tested
    assert "esr" in analyse(trace("electrolytic_sound"), CAN).not_tested


def test_thresholds_decide() -> None:
    """Near its limit a part is undecided by the usual thresholds and decided by bolder ones."""
    near = analyse(trace("film_47n"), replace(FILM, capacitance_F=47e-9 / 1.198), None)
    row = next(limit for limit in near.limits if limit.id == "capacitance")
    assert row.p_conform is not None
    assert 0.05 < row.p_conform < 0.95
    assert near.verdict == "undecided"
    assert near.to_decide
    bold = analyse(
        trace("film_47n"),
        replace(FILM, capacitance_F=47e-9 / 1.198),
        None,
        thresholds=Thresholds(row.p_conform / 2, 1e-9),
    )
    assert bold.verdict == "fit"


def test_an_unsure_limit_blesses_but_does_not_condemn() -> None:
    """Paper of 100 Mohm misses the remembered minima; only what an ohmmeter shows condemns."""
    dwell = trace("film_47n")
    leaky = replace(
        dwell, i_shunt_A=np.where(dwell.stage == "dwell", dwell.v_part_V / 100e6, dwell.i_shunt_A)
    )
    shown = replace(leaky, shunt_ohm=np.where(dwell.stage == "dwell", 560.0, dwell.shunt_ohm))
    outcome = judge(shown, part("paper", 47e-9, 600.0))
    assert outcome.verdict == "undecided"
    assert "from memory" in outcome.reason


@pytest.mark.parametrize("grade", GRADES)
def test_grades(grade: str) -> None:
    outcome = analyse(trace("electrolytic_sound"), CAN, grade=grade)
    assert outcome.grade == grade
    ruling = {"new": "al_new", "period": "jan_c_62_450V", "aged": "al_aged"}[grade]
    assert ruling in {limit.id for limit in outcome.limits}


def test_what_was_assumed_is_told() -> None:
    outcome = analyse(trace("film_47n"), FILM)
    assert [word.split(":")[0] for word in outcome.assumed] == ["charge_ohm", "divider_ohm", "bleed_ohm"]


def test_whether_the_dwell_was_whole() -> None:
    assert judge(trace("film_47n"), FILM).dwell_complete
    assert judge(trace("film_47n"), FILM, asked_s=20.0).dwell_complete
    assert not judge(trace("film_47n"), FILM, asked_s=60.0).dwell_complete
    cut = judge(trace("film_47n"), FILM, end="finished")
    assert not cut.dwell_complete
    assert any("cut short" in note for note in cut.notes)


def test_the_same_arguments_give_the_same_outcome() -> None:
    assert analyse(trace("bursts"), FILM_100N, "tone") == analyse(trace("bursts"), FILM_100N, "tone")


def test_a_part_of_unknown_kind_is_for_a_place_or_undecided() -> None:
    bare = part(None, 47e-9, 630.0)
    assert analyse(trace("film_47n"), bare).verdict == "undecided"
    assert analyse(trace("film_47n"), bare, "coupling").verdict == "fit"


def test_wrong_use_is_told() -> None:
    with pytest.raises(UsageError, match="grade"):
        analyse(trace("film_47n"), FILM, grade="ancient")
    with pytest.raises(UsageError, match="place"):
        analyse(trace("film_47n"), FILM, "nowhere")
    with pytest.raises(TraceError):
        analyse(DATA / "absent.csv", FILM)


def test_a_place_without_given_volts_goes_as_far_as_the_rating() -> None:
    low = part("film", 100e-9, 250.0)
    place = Place.parse("coupling")
    made = Case(trace("bursts"), low, place, "new", None)  # type: ignore[arg-type]
    assert made.place_V == 250.0
    assert replace(made, part=FILM).place_V == 310.0
    assert replace(made, place=Place.parse("coupling@310V")).place_V == 310.0
