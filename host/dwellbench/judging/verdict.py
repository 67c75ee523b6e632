"""The verdict of a run that was measured, the sentence that says why, what would decide it, and what to do
next.
"""

from __future__ import annotations

from dataclasses import dataclass

from dwellbench.judging.case import Case
from dwellbench.judging.rows import Row, insulation_rows
from dwellbench.judging.say import si, volts
from dwellbench.limits.decide import FIT, UNDECIDED, UNFIT
from dwellbench.limits.demands import VISIBLE_OHM
from dwellbench.outcome import Finding

_CHECK_ESR = ("electrolytic",)
_FORMED = ("electrolytic", "tantalum")
_INSIDE = ("paper", "electrolytic", "tantalum", None)  # what leaks there leaks inside, not over its surface
_SURFACE_OHM = (
    1e8  # a dirty or damp surface leaks like this or less (from memory: 10 to 100 Gohm); worse is inside
)
_NEAR = 1.02
_FALLS_PER_S = -0.01 / 60.0


@dataclass(frozen=True)
class Decision:
    """What was decided and in what words."""

    verdict: str
    reason: str
    next: str | None
    to_decide: str | None


def decide(case: Case, rows: list[Row], found: list[Finding], elsewhere: bool) -> Decision:
    """Decide. `rows` are the limits that rule, hardest first; `elsewhere`: other places take the part."""
    ids = {finding.id: finding.evidence for finding in found}
    verdict, reason, to_decide = _verdict(case, [row for row in rows if row.rules], ids)
    return Decision(verdict, reason, _next(case, verdict, rows, ids, elsewhere), to_decide)


def _verdict(case: Case, rows: list[Row], ids: dict[str, str]) -> tuple[str, str, str | None]:
    for look in (_certain, _forbidden, _condemned, _unseen, _doubtful, _blessed):
        answer = look(case, rows, ids)
        if answer is not None:
            return answer
    return _between(case, rows)


_Answer = tuple[str, str, str | None] | None


def _certain(case: Case, rows: list[Row], ids: dict[str, str]) -> _Answer:
    """What no limit has to be asked for."""
    if "short" in ids:
        return UNFIT, "The part is shorted.", None
    if "open_lead" in ids:
        again = "Clean the leads, fit the part again and repeat; if it stays, the part is open: scrap."
        return (
            UNFIT,
            "No charge flowed into the part: a lead is open inside, or a clip does not touch.",
            again,
        )
    if "reversed" in ids:
        return (
            UNDECIDED,
            "The voltage stalled at a few volts.",
            "Fit the part the other way round and test again.",
        )
    return None


def _forbidden(case: Case, rows: list[Row], ids: dict[str, str]) -> _Answer:
    """Places that no test on a bench makes a part fit for."""
    if case.place is None or not case.place.never_fit:
        return None
    return (
        UNFIT,
        (
            f"The place {case.place.kind.id} puts mains or high voltage on something that is touched if "
            "the part shorts; "
            "it needs a part that licensed practice accepts there, with its own safety approval."
        ),
        None,
    )


def _condemned(case: Case, rows: list[Row], ids: dict[str, str]) -> _Answer:
    """A limit that may condemn is missed with certainty enough."""
    missed = [row for row in rows if row.may_reject and row.p_least is not None]
    missed = [row for row in missed if case.thresholds.verdict(row.p_least or 0.0) == UNFIT]
    if not missed and _fails_by_bursts(case, ids):
        return UNFIT, "It breaks through again and again under voltage.", None
    if not missed:
        return None
    about_leakage = any(True for _ in insulation_rows(missed))
    if about_leakage and "forming" in ids and all(row.result.quantity == "total_current_A" for row in missed):
        again = "Re-form it, let it rest, then test again."
        return UNDECIDED, f"Still forming: {ids['forming']} {_told(case, missed[0])}", again
    return UNFIT, _told(case, missed[0]), None


def _fails_by_bursts(case: Case, ids: dict[str, str]) -> bool:
    """Paper that clears and clears again is failing; metallised film heals, which is for the user to know."""
    return "intermittent" in ids and case.part.dielectric == "paper"


def _unseen(case: Case, rows: list[Row], ids: dict[str, str]) -> _Answer:
    """No part is sound without its charge and its leakage having been seen."""
    if case.leakage is None:
        if "clipped" in ids:
            return (
                UNDECIDED,
                "The end of the dwell clipped, so no current was read.",
                "Test again on a lower shunt.",
            )
        longer = "Hold the voltage longer, until the shunt has settled."
        return UNDECIDED, "No settled reading of the current stands at the end of the dwell.", longer
    if case.capacitance is None:
        why = "Its charge was not seen, and an open lead would look just as good."
        return UNDECIDED, why, "Test it from the discharged state, with the charging recorded."
    if not rows:
        kind = case.part.dielectric or "unknown"
        ask = "Say what dielectric it is, give its rating, or name the place with --role."
        return UNDECIDED, f"No limit is known for this part (dielectric {kind}, grade {case.grade}).", ask
    if not any(True for _ in insulation_rows(rows)) and (case.place is None or not case.place.beyond_box):
        ask = "Mark the dielectric and rating, or name the place with --role."
        return UNDECIDED, "No limit of its leakage is known for such a part.", ask
    return None


def _doubtful(case: Case, rows: list[Row], ids: dict[str, str]) -> _Answer:
    """What keeps even a good reading from being a verdict."""
    if case.place is not None and case.place.beyond_box:
        why = f"The place {case.place.kind.id} stresses the part by pulses that this box does not make."
        return UNDECIDED, f"{why} {_held(case)}", "Fit a part that its maker rates for such pulses."
    needed_V = case.place_V
    if needed_V is not None and (case.valid_to_V or 0.0) * _NEAR < needed_V:
        why = f"Tested at {volts(case.test_V)}, below the place's {volts(needed_V)}."
        if "sag" in ids:
            again = (
                "Re-form it, let it rest, then test again." if _may_form(case) else "Find what leaks first."
            )
            return UNDECIDED, f"{ids['sag']} The place has {volts(needed_V)}.", again
        return UNDECIDED, why, f"Test it at {volts(needed_V)}."
    if "intermittent" in ids:
        return (
            UNDECIDED,
            f"Not steady: {ids['intermittent']}",
            "Test it again; if the bursts return, scrap it.",
        )
    if "charging" in ids:
        return UNDECIDED, f"The charge is not in yet. {ids['charging']}", "Hold the voltage longer."
    if "sag" in ids and "forming" in ids:
        return UNDECIDED, f"Still forming: {ids['sag']}", "Re-form it, let it rest, then test again."
    if "sag" in ids and case.place is None:
        return UNDECIDED, ids["sag"], "Test it at a voltage that the charge path can hold."
    return None


def _blessed(case: Case, rows: list[Row], ids: dict[str, str]) -> _Answer:
    """Every limit that rules is met with certainty enough."""
    asked = [row for row in rows if row.p is not None]
    if any(case.thresholds.verdict(row.p or 0.0) != FIT for row in asked):
        return None
    leak = next(insulation_rows(asked), asked[0])
    return FIT, _told(case, leak, met=True), None


def _between(case: Case, rows: list[Row]) -> tuple[str, str, str | None]:
    """Neither certain enough: the limit in doubt, and what would decide it."""
    doubt = next(row for row in rows if row.p is not None and case.thresholds.verdict(row.p) != FIT)
    told = f"{_told(case, doubt)} The probability that it conforms is {100.0 * (doubt.p or 0.0):.3g} %."
    if not doubt.may_reject and case.thresholds.verdict(doubt.p or 0.0) == UNFIT:
        return (
            UNDECIDED,
            f"{told} The limit itself is from memory.",
            "Name the place with --role, or take a sourced limit.",
        )
    return UNDECIDED, told, _what_helps(case, doubt)


def _what_helps(case: Case, row: Row) -> str:
    """The largest doubt, and what makes it smaller."""
    leak = case.leakage
    if row.result.quantity == "capacitance_F" or leak is None:
        return "Calibrate the box; the capacitance lies within its doubt of the tolerance."
    through = abs(leak.through_A)
    doubts = {
        "Hold the voltage longer, so that the absorption dies away.": 0.5 * leak.absorbed_A,
        "Measure the empty fixture (`zero`), clean and dry it.": leak.u_fixture_A,
        "Calibrate the box: the doubt is in its gains.": through * case.estimates.u_gain,
        "Hold the voltage longer, so that the noise averages out.": leak.u_read_A,
        "Let the supply warm up: its drift charges the part.": max(leak.u_charging_A, abs(leak.charging_A)),
    }
    return max(doubts, key=lambda words: doubts[words])


def _told(case: Case, row: Row, met: bool = False) -> str:
    """One sentence about one limit: what was found against what is asked."""
    result = row.result
    if result.quantity == "capacitance_F":
        found = case.capacitance
        return f"Found {si(found.value if found else None, 'F')} where {si(result.value, 'F')} is marked."
    if result.quantity == "rated_V":
        return f"Rated {volts(case.part.rated_V)}, and the place has {volts(result.value)}."
    asked = f"{_whose(case, row)} {'at most' if result.quantity == 'total_current_A' else 'at least'} "
    return f"{_held(case)} {asked}{si(result.value, result.unit)}."


def _whose(case: Case, row: Row) -> str:
    if row.result.grade == "place" and case.place is not None:
        return f"the place {case.place.kind.id} asks"
    return f"the limit {row.result.id} (grade {case.grade}) asks"


def _held(case: Case) -> str:
    """The reading in words."""
    leak, ohm = case.leakage, case.estimates.insulation_ohm()
    if leak is None or ohm is None:
        return "Nothing was read;"
    insulates = f"above {si(ohm.low, 'ohm')}" if ohm.value is None else si(ohm.value, "ohm")
    return f"At {volts(leak.volts_V)} it passes {si(leak.total_A, 'A')} (insulation {insulates});"


def _next(case: Case, verdict: str, rows: list[Row], ids: dict[str, str], elsewhere: bool) -> str | None:
    if verdict == FIT:
        return _next_fit(case, ids)
    if verdict == UNFIT:
        return _next_unfit(case, rows, ids, elsewhere)
    if "forming" in ids or ("sag" in ids and _may_form(case)):
        return "re_form_then_test"
    if case.place is not None and case.place.beyond_box:
        return "other_place"
    return "clean_and_retest" if "fixture" in ids else None


def _may_form(case: Case) -> bool:
    """An electrolytic that pulls the voltage down may only have lost oxide."""
    return case.part.dielectric == "electrolytic"


def _next_fit(case: Case, ids: dict[str, str]) -> str:
    valid_V, rated_V = case.valid_to_V, case.part.rated_V
    usual_V = case.place.volts_V if case.place is not None and case.place.given_V is None else None
    wanted = [v for v in (usual_V, rated_V if case.place is None else None) if v is not None]
    if valid_V is not None and (
        any(v > _NEAR * valid_V for v in wanted) or ids.keys() & {"superlinear", "sag"}
    ):
        return "use_up_to"
    return "check_esr" if case.part.dielectric in _CHECK_ESR and case.esr_ohm is None else "use"


def _next_unfit(case: Case, rows: list[Row], ids: dict[str, str], elsewhere: bool) -> str:
    if "short" in ids:
        return "scrap"
    if "open_lead" in ids:
        return "clean_and_retest"
    if case.place is not None and case.place.never_fit:
        return "other_place"
    leak, leaks = (
        case.leakage,
        any(case.thresholds.verdict(row.p or 0.0) != FIT for row in insulation_rows(rows)),
    )
    if (
        leaks
        and leak is not None
        and case.part.dielectric == "electrolytic"
        and leak.slope_per_s < _FALLS_PER_S
    ):
        return "re_form_then_test"
    ohm = case.estimates.insulation_ohm()
    high = ohm is not None and (ohm.value or ohm.low or 0.0) >= _SURFACE_OHM
    if leaks and high and case.part.dielectric not in _INSIDE:
        return "clean_and_retest"
    if (
        ohm is not None
        and ohm.high is not None
        and ohm.high < VISIBLE_OHM
        and case.part.dielectric not in _FORMED
    ):
        return "scrap"
    return "other_place" if elsewhere and case.place is not None else "scrap"
