"""What a place demands of a part's insulation: the current that may flow through it at the voltage of the
test.
"""

from __future__ import annotations

from dataclasses import dataclass

from dwellbench.limits.place import Place
from dwellbench.limits.places import FILTER, GRID_SHIFT, SERIES_SHARE
from dwellbench.limits.table import LIMITS
from dwellbench.limits.temperature import warmed
from dwellbench.part import Part

VISIBLE_OHM = 15e6
"""What an ohmmeter shows: bad in any part but an electrolytic (restorers' practice, nostalgiaair.org)."""

_FORMED = ("electrolytic", "tantalum")


@dataclass(frozen=True)
class Demand:
    """`least_ohm` at the place's own temperature, or None for a demand on the current; `most_A` at the test's
    voltage and temperature. `warmed` is the factor between them.
    """

    place: Place
    quantity: str
    value: float
    unit: str
    least_ohm: float | None
    most_A: float
    warmed: float


def place_volts(place: Place, part: Part) -> float | None:
    """The voltage a part meets there: as the role gave it, else the kind's usual one as far as the rating goes."""
    if place.given_V is not None or place.volts_V is None:
        return place.given_V
    rated_V = part.rated_V if part.rated_kind == "dc" else None
    return place.volts_V if rated_V is None else min(place.volts_V, rated_V)


def least_ohm(place: Place) -> float | None:
    """Insulation that the place needs, ohms, at its working temperature; None when it is not judged by
    insulation.

    Grid shift: Vg = Va Rg / (Rg + R), so R >= Rg (Va / Vg - 1).
    """
    volts, series, tolerated = place.volts_V, place.series_ohm, place.kind.tolerated
    if volts is None or series is None or tolerated is None:
        return None
    if place.kind.rule == GRID_SHIFT:
        return max(series * (volts / tolerated - 1.0), 0.0)
    return series * tolerated if place.kind.rule == SERIES_SHARE else None


def demand(
    place: Place, part: Part, test_V: float, temperature_C: float | None, capacitance_F: float | None
) -> Demand | None:
    """The place's demand at the voltage and temperature of the test; None when it has none of this kind."""
    factor = warmed(part.dielectric, temperature_C, place.kind.temperature_C)
    if place.kind.rule in (GRID_SHIFT, SERIES_SHARE):
        ohm = least_ohm(place)
        if ohm is None or ohm <= 0.0 or test_V <= 0.0:
            return None
        return Demand(place, "insulation_ohm", ohm * factor, "ohm", ohm, test_V / (ohm * factor), factor)
    if place.kind.rule == FILTER:
        return _filter_demand(place, part, capacitance_F, test_V)
    return None


def _filter_demand(place: Place, part: Part, capacitance_F: float | None, test_V: float) -> Demand | None:
    """Electrolytics by their period's formula; any other kind that lets an ohmmeter move is failing, whatever
    the filter would tolerate.
    """
    if part.dielectric in _FORMED or part.polar:
        amps = filter_A(part, capacitance_F, test_V)
        return None if amps is None else Demand(place, "total_current_A", amps, "A", None, amps, 1.0)
    return Demand(place, "insulation_ohm", VISIBLE_OHM, "ohm", VISIBLE_OHM, test_V / VISIBLE_OHM, 1.0)


def filter_A(part: Part, capacitance_F: float | None, test_V: float) -> float | None:
    """Amperes that a filter position tolerates: the period's formula at the marked voltage, for any kind of
    part.
    """
    rated_V = part.rated_V or test_V
    for limit in LIMITS:
        if limit.id.startswith("jan_c_62") and limit.volts[0] < rated_V <= limit.volts[1] and capacitance_F:
            return limit.value(capacitance_F, rated_V)
    top = next(limit for limit in LIMITS if limit.id == "jan_c_62_450V")
    return top.value(capacitance_F, rated_V) if capacitance_F else None


def grid_shift_V(place: Place, ohm: float) -> float | None:
    """Volts that an insulation of `ohm` puts on the grid behind the place; None when there is no grid leak
    there.
    """
    if place.kind.rule != GRID_SHIFT or place.volts_V is None or place.series_ohm is None:
        return None
    return place.volts_V * place.series_ohm / (place.series_ohm + ohm)


def most_series_ohm(place: Place, ohm: float) -> float | None:
    """The largest grid leak or feeding resistance that an insulation of `ohm` still serves at the place's
    voltage.
    """
    volts, tolerated = place.volts_V, place.kind.tolerated
    if tolerated is None:
        return None
    if place.kind.rule == GRID_SHIFT and volts is not None and volts > tolerated:
        return ohm / (volts / tolerated - 1.0)
    return ohm / tolerated if place.kind.rule == SERIES_SHARE else None
