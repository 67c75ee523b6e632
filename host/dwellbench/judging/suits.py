"""Which places a part suits, and which it does not: every place of the table at its usual numbers."""

from __future__ import annotations

from math import floor, log10

from dwellbench.judging.case import Case
from dwellbench.judging.rows import place_rows
from dwellbench.limits.decide import FIT, UNFIT
from dwellbench.limits.demands import most_series_ohm
from dwellbench.limits.place import Place
from dwellbench.limits.places import KINDS
from dwellbench.limits.temperature import warmed
from dwellbench.outcome import Suit

_POLAR_PLACES = ("cathode_bypass", "screen_bypass", "plate_decoupling", "supply_filter")


def places_of(case: Case) -> tuple[list[Suit], list[Suit]]:
    """(suits, not for). A place whose probability lies between the thresholds stands in neither."""
    suits: list[Suit] = []
    not_for: list[Suit] = []
    if case.leakage is None or case.capacitance is None or case.valid_to_V is None:
        return suits, not_for
    for kind in KINDS:
        place = Place(kind)
        if place.never_fit or place.beyond_box:
            not_for.append(Suit(kind.id, None, None))
            continue
        volts_V = min(case.valid_to_V, place.volts_V or case.valid_to_V)
        verdict = _verdict(case, place, volts_V)
        if verdict == FIT:
            suits.append(Suit(kind.id, _up_to_V(case, place), _series(case, place, volts_V)))
        elif verdict == UNFIT:
            not_for.append(Suit(kind.id, volts_V, place.series_ohm))
    return suits, not_for


def _verdict(case: Case, place: Place, volts_V: float) -> str:
    if case.part.polar and place.kind.id not in _POLAR_PLACES:
        return UNFIT
    rows = [row for row in place_rows(case, place, volts_V) if row.result.id != "rated_voltage"]
    asked = [row for row in rows if row.p is not None]
    if any(row.may_reject and case.thresholds.verdict(row.p_least or 0.0) == UNFIT for row in asked):
        return UNFIT
    known = bool(asked) and all(case.thresholds.verdict(row.p or 0.0) == FIT for row in asked)
    return FIT if known and any(row.result.id.startswith("place_") for row in asked) else "undecided"


def _up_to_V(case: Case, place: Place) -> float | None:
    """The highest voltage there: where the demand does not depend on it, all that was tested; else the
    place's usual.
    """
    if place.kind.rule == "grid_shift" and place.volts_V is not None and case.valid_to_V is not None:
        return min(case.valid_to_V, place.volts_V)
    return case.valid_to_V


def _series(case: Case, place: Place, volts_V: float) -> float | None:
    """The largest grid leak or feeding resistance that the least insulation still serves, two figures,
    rounded down.
    """
    ohm = case.estimates.insulation_ohm()
    if ohm is None or ohm.low is None:
        return None
    warm = warmed(case.part.dielectric, case.temperature_C, place.kind.temperature_C)
    most = most_series_ohm(Place(place.kind, volts_V), ohm.low / warm)
    if most is None or most <= 0.0:
        return None
    step = 10.0 ** (floor(log10(most)) - 1)
    return floor(most / step) * step
