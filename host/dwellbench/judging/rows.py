"""Limits weighed: each becomes a row with the probability that the part conforms, and whether it may bless or
condemn.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from math import hypot

from dwellbench.judging.case import Case
from dwellbench.limits.decide import conformity
from dwellbench.limits.demands import demand
from dwellbench.limits.limit import COMMON, INSULATION, MEMORY, UNITS, Limit, at_most_A
from dwellbench.limits.place import Place
from dwellbench.limits.places import FILTER
from dwellbench.limits.table import limits_for
from dwellbench.measure.leakage import Leakage, read_leakage
from dwellbench.outcome import LimitResult

_GRACE_S = 5.0  # one minute is 60 +/- 5 s (IEC 60384-1, 4.5.2)
_MARKED = "marking"

# Usual tolerances where none is marked; from memory of period catalogues.
_USUAL_TOLERANCE = {
    "electrolytic": (-0.2, 1.0),
    "tantalum": (-0.2, 0.2),
    "ceramic_2": (-0.2, 0.8),
    "ceramic": (-0.2, 0.8),
}
_USUAL = (-0.2, 0.2)
_PLACE_TOLERANCE = (-0.3, 1.0)  # what most circuits shrug off; common practice, no source
_CLASS_II_U = 0.1  # its value moves with voltage and temperature, and the marking is at 1 kHz and no bias


@dataclass(frozen=True)
class Row:
    """One limit as weighed. `p_least` is the probability by the least conduction that there can be: what may
    condemn.
    """

    result: LimitResult
    p_least: float | None
    may_reject: bool
    rules: bool
    early: bool = False
    most_A: float | None = None

    @property
    def p(self) -> float | None:
        """Probability that the part conforms."""
        return self.result.p_conform


def as_new_rows(case: Case) -> list[Row]:
    """What a standard or series asks of such a part; the deciding rows first, the hardest of them at the
    head.
    """
    ruling, beside = limits_for(case.part, case.rating_F, case.grade)
    rows = [_limit_row(case, limit, True) for limit in ruling]
    capacitance = _capacitance_row(case, None)
    deciding = sorted([*rows, *([capacitance] if capacitance else [])], key=_hardest)
    return [*deciding, *(_limit_row(case, limit, False) for limit in beside)]


def place_rows(case: Case, place: Place, place_V: float | None) -> list[Row]:
    """What the place asks; the hardest first."""
    rows = [
        _rated_row(case, place, place_V),
        _demand_row(case, place, place_V),
        _capacitance_row(case, place),
    ]
    return sorted([row for row in rows if row is not None], key=_hardest)


def _hardest(row: Row) -> tuple[float, bool, bool]:
    """Least probable first; of equals, what was measured before what is only written on the part."""
    return (2.0 if row.p is None else row.p, row.result.quantity == "rated_V", not row.may_reject)


def _limit_row(case: Case, limit: Limit, rules: bool) -> Row:
    """A published limit against the current at its time, or at the end of a shorter dwell."""
    rating_F = case.rating_F or 0.0
    value = limit.value(rating_F, case.part.rated_V)
    result = LimitResult(
        limit.id,
        limit.quantity,
        value,
        UNITS[limit.quantity],
        case.grade,
        limit.source,
        limit.status,
        None,
        False,
    )
    leak, early = _at(case, limit.time_s)
    if leak is None:
        return Row(result, None, limit.may_reject, rules)
    most_A = at_most_A(limit, leak.volts_V, rating_F, case.part.rated_V)
    p, p_least, reached = _weigh(case, leak, most_A, early)
    return Row(replace(result, p_conform=p, reached=reached), p_least, limit.may_reject, rules, early, most_A)


def _at(case: Case, time_s: float) -> tuple[Leakage | None, bool]:
    """The reading at a limit's time; the end's when the dwell was shorter (then the second is True) or just
    as long.
    """
    end = case.leakage
    if end is None:
        return None, False
    if end.time_s <= time_s + _GRACE_S:
        return end, end.time_s < time_s - _GRACE_S
    estimates = case.estimates
    farads = estimates.capacitance.value if estimates.capacitance else None
    then = read_leakage(case.trace, estimates.circuit, estimates.settled, farads, time_s)
    return (end if then is None else then), False


def _weigh(case: Case, leak: Leakage, most_A: float, early: bool) -> tuple[float, float, bool]:
    """Probability by the total current, by the least conduction if the dwell was cut short, and whether the
    box can tell.
    """
    through = leak.total_A - leak.fixture_A
    u = hypot(hypot(leak.u_read_A, leak.u_fixture_A), hypot(leak.charging_A, leak.u_charging_A))
    u_all = hypot(u, through * case.estimates.u_gain)
    p = conformity(through, u_all, upper=most_A)
    p_least = conformity(leak.least_A, u_all, upper=most_A) if early else p
    return p, p_least, conformity(0.0, u, upper=most_A) >= case.thresholds.accept


def _demand_row(case: Case, place: Place, place_V: float | None) -> Row | None:
    """The place's demand on insulation: conduction alone counts, since what is absorbed has ended after
    minutes.
    """
    leak = case.leakage
    test_V = leak.volts_V if leak is not None else (place_V or 0.0)
    wanted = demand(replace(place, given_V=place_V), case.part, test_V, case.temperature_C, case.rating_F)
    if wanted is None:
        return None
    result = LimitResult(
        f"place_{place.kind.id}",
        wanted.quantity,
        wanted.value,
        wanted.unit,
        "place",
        place.kind.source,
        COMMON,
        None,
        False,
    )
    if leak is None:
        return Row(result, None, True, True)
    if place.kind.rule == FILTER:
        p, p_least, reached = _weigh(case, leak, wanted.most_A, leak.time_s < 300.0 - _GRACE_S)
    else:
        u = hypot(leak.u_conduction_A, leak.conduction_A * case.estimates.u_gain)
        p = p_least = conformity(leak.conduction_A, u, upper=wanted.most_A)
        reached = conformity(0.0, leak.u_through_A, upper=wanted.most_A) >= case.thresholds.accept
    return Row(replace(result, p_conform=p, reached=reached), p_least, True, True, most_A=wanted.most_A)


def _rated_row(case: Case, place: Place, place_V: float | None) -> Row | None:
    """The rating against the place's voltage; an AC rating is not turned into DC."""
    rated_V = case.part.rated_V
    if rated_V is None or case.part.rated_kind != "dc" or place_V is None:
        return None
    p = 1.0 if rated_V >= place_V else 0.0
    source = "the place's highest voltage, before the valves conduct"
    result = LimitResult("rated_voltage", "rated_V", place_V, "V", "place", source, COMMON, p, True)
    return Row(result, p, True, True)


def _capacitance_row(case: Case, place: Place | None) -> Row | None:
    """The value against its marking's tolerance, widened for a place."""
    marked, found = case.part.capacitance_F, case.estimates.capacitance
    if not marked:
        return None
    low, high = case.part.tolerance or _USUAL_TOLERANCE.get(case.part.dielectric or "", _USUAL)
    status = _MARKED if case.part.tolerance else MEMORY
    source = (
        "tolerance marked on the part"
        if case.part.tolerance
        else "usual tolerance of such parts, none is marked"
    )
    if place is not None:
        low, high = min(low, _PLACE_TOLERANCE[0]), max(high, _PLACE_TOLERANCE[1])
        source, status = "what a place of this kind tolerates", COMMON
    grade = case.grade if place is None else "place"
    result = LimitResult(
        "capacitance", "capacitance_F", marked, "F", grade, source, status, None, found is not None
    )
    if found is None:
        return Row(result, None, True, True)
    u = hypot(found.u, _CLASS_II_U * marked if case.part.dielectric in ("ceramic_2", "ceramic") else 0.0)
    p = conformity(found.value, u, marked * (1.0 + low), marked * (1.0 + high))
    return Row(replace(result, p_conform=p), p, True, True)


def insulation_rows(rows: list[Row]) -> Iterator[Row]:
    """The rows that are about leakage."""
    return (row for row in rows if row.result.quantity in (INSULATION, "total_current_A"))
