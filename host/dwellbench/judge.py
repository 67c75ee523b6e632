"""The judge: a trace, the part it was made with and the place it is meant for become an outcome.

Two answers that are never merged: `as new` is what a standard or series asks of such a part, `for the place`
what the circuit position tolerates. With a place the verdict is the place's and a missed series limit is a
finding; without one it is as new, and the outcome lists the places that the part suits.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

from dwellbench.errors import UsageError
from dwellbench.judging.case import Case
from dwellbench.judging.early import Early, early, stricter
from dwellbench.judging.ends import MEASURED, ended
from dwellbench.judging.findings import findings
from dwellbench.judging.notes import assumed, not_tested, notes
from dwellbench.judging.rows import as_new_rows, place_rows
from dwellbench.judging.suits import places_of
from dwellbench.judging.verdict import decide
from dwellbench.limits.decide import Thresholds
from dwellbench.limits.demands import grid_shift_V
from dwellbench.limits.place import ANY, Place
from dwellbench.measure.budget import Budget, budgets_of
from dwellbench.measure.csv_read import read_csv
from dwellbench.measure.estimates import estimate
from dwellbench.measure.trace import Trace
from dwellbench.outcome import Finding, Outcome
from dwellbench.part import Part
from dwellbench.plan import GRADES
from dwellbench.quantity import Quantity

_DWELL_GRACE = 0.97


def analyse(
    trace: Trace | str | Path,
    part: Part | str,
    role: str | Place | None = None,
    *,
    grade: str = "new",
    thresholds: Thresholds | None = None,
    esr_ohm: float | None = None,
) -> Outcome:
    """Judge a recorded trace: a Trace or the path of its file, a Part or its marking, a role such as
    `coupling@310V/470k`.

    Raises TraceError, MarkingError or UsageError for what cannot be read.
    """
    read = trace if isinstance(trace, Trace) else read_csv(trace)
    what = part if isinstance(part, Part) else Part.parse(part)
    place = Place.parse(role) if isinstance(role, str) else role
    outcome = judge(read, what, place, grade=grade, thresholds=thresholds, esr_ohm=esr_ohm)
    return outcome.stamped(role=ANY) if isinstance(role, str) and place is None and role.strip() else outcome


def judge(
    trace: Trace,
    part: Part,
    place: Place | None = None,
    *,
    grade: str = "new",
    end: str | None = None,
    fault: str | None = None,
    thresholds: Thresholds | None = None,
    asked_V: float | None = None,
    asked_s: float | None = None,
    esr_ohm: float | None = None,
) -> Outcome:
    """Judge one run. What is left out of `end`, `fault`, `asked_V` and `asked_s` is taken from the trace's
    header.

    `asked_V`, `asked_s`: voltage and dwell of the plan. Pure: the same arguments give the same outcome.
    Raises UsageError.
    """
    if grade not in GRADES:
        raise UsageError(f"{grade!r} is not a grade.", remedy=f"Use one of: {', '.join(GRADES)}.")
    case = Case(
        trace=trace,
        part=part,
        place=place,
        grade=grade,
        estimates=estimate(trace, part.capacitance_F, part.dielectric),
        thresholds=thresholds or Thresholds(),
        end=end or trace.text("end") or "complete",
        fault=_named(fault or trace.text("fault")),
        asked_V=_first(asked_V, trace.number("asked_V")),
        asked_s=_first(asked_s, trace.number("dwell_asked_s")),
        esr_ohm=esr_ohm,
    )
    if case.end not in MEASURED or not trace.rows("dwell").any():
        return _early(case)
    return _measured(case)


def may_end(
    trace: Trace,
    part: Part,
    place: Place | None = None,
    *,
    grade: str = "new",
    thresholds: Thresholds | None = None,
) -> Early | None:
    """Say whether the dwell of a run under way may end now, and why; None: hold on. `trace` is what has come so far."""
    now = judge(trace, part, place, grade=grade, end="finished", thresholds=stricter(thresholds))
    return early(now, part, place)


def _named(fault: str | None) -> str | None:
    return None if fault in (None, "", "none", "None") else fault


def _first(*values: float | None) -> float | None:
    return next((value for value in values if value is not None), None)


def _stamp(case: Case) -> dict[str, Any]:
    """What the trace says of where it came from."""
    trace = case.trace
    return {
        "part": case.part,
        "role": case.place.role if case.place else None,
        "grade": case.grade,
        "end": case.end,
        "fault": case.fault,
        "temperature_C": case.temperature_C,
        "humidity_percent": trace.number("humidity_percent"),
        "run": trace.text("run"),
        "time_utc": trace.text("time_utc"),
        "box": trace.text("box"),
        "firmware": trace.text("firmware"),
        "calibration": trace.text("calibration"),
        "simulated": trace.text("simulated") == "True",
    }


def _early(case: Case) -> Outcome:
    """A run that ended before a reading."""
    told = ended(case)
    return Outcome(
        **_stamp(case),
        verdict=told.verdict,
        reason=told.reason,
        next=told.next,
        to_decide=told.to_decide,
        findings=(told.finding,),
        not_tested=not_tested(case),
        assumed=assumed(case),
        notes=(),
    )


def _measured(case: Case) -> Outcome:
    """A run that came to its dwell."""
    series = as_new_rows(case)
    rows = place_rows(case, case.place, case.place_V) if case.place is not None else series
    found = findings(case, rows, series)
    if any(finding.id == "open_lead" for finding in found):
        return _unconnected(case, found)
    suits, not_for = places_of(case)
    decision = decide(case, rows, found, bool(suits))
    shown = [*rows, *(row for row in series if case.place is not None)]
    estimates = case.estimates
    shift = _grid_shift(case)
    return Outcome(
        **_stamp(case),
        verdict=decision.verdict,
        reason=decision.reason,
        next=decision.next,
        to_decide=decision.to_decide,
        findings=tuple(found),
        limits=tuple(row.result for row in shown),
        suits=tuple(suits),
        not_for=tuple(not_for),
        valid_to_V=case.valid_to_V,
        not_tested=not_tested(case),
        test_V=case.test_V,
        dwell_s=estimates.dwell_s,
        dwell_complete=_complete(case),
        capacitance_F=case.capacitance,
        total_current_A=estimates.total_current_A(),
        leakage_A=estimates.leakage_A(),
        insulation_ohm=estimates.insulation_ohm(),
        time_constant_s=estimates.time_constant_s(),
        absorption_ratio=estimates.absorption_ratio,
        polarisation_index=estimates.polarisation_index,
        recovery_percent=estimates.recovery_percent,
        grid_shift_V=shift,
        assumed=assumed(case),
        notes=notes(case, found),
        budgets=_budgets(case, shift),
    )


def _unconnected(case: Case, found: list[Finding]) -> Outcome:
    """Nothing was connected, so what the shunt read says nothing of the part."""
    decision = decide(case, [], found, False)
    kept = tuple(
        finding
        for finding in found
        if finding.id in ("open_lead", "uncalibrated", "calibration", "residual_charge")
    )
    return Outcome(
        **_stamp(case),
        verdict=decision.verdict,
        reason=decision.reason,
        next=decision.next,
        to_decide=decision.to_decide,
        findings=kept,
        not_tested=not_tested(case),
        dwell_s=case.estimates.dwell_s,
        dwell_complete=_complete(case),
        capacitance_F=case.capacitance,
        assumed=assumed(case),
    )


def _complete(case: Case) -> bool:
    """Whether the dwell was held as long as asked; where nobody says what was asked, whether it ended by
    itself.
    """
    held_s = case.estimates.dwell_s or 0.0
    if case.asked_s is not None:
        return held_s >= _DWELL_GRACE * case.asked_s
    return case.end == "complete"


def _budgets(case: Case, shift: Quantity | None) -> dict[str, Budget]:
    """What made up each stated uncertainty; the grid's shift has the insulation's sources."""
    made = budgets_of(case.estimates)
    ohm = case.estimates.insulation_ohm()
    if shift is not None and shift.u is not None and ohm is not None and ohm.u:
        made["grid_shift_V"] = tuple(line.scaled(-shift.u / ohm.u) for line in made["insulation_ohm"])
    return made


def _grid_shift(case: Case) -> Quantity | None:
    """What the part puts on the grid behind its place, from the insulation found; bounds change places."""
    ohm = case.estimates.insulation_ohm()
    if case.place is None or ohm is None:
        return None
    at = Place(case.place.kind, case.place_V, case.place.given_ohm)

    def shift(value: float | None) -> float | None:
        return None if value is None else grid_shift_V(at, value)

    value, low, high = shift(ohm.value), shift(ohm.high), shift(ohm.low)
    if high is None:
        return None
    if value is None or ohm.value is None or ohm.u is None or low is None:
        return Quantity.below(high)
    return Quantity.between(value, value * ohm.u / ohm.value, low, high)
