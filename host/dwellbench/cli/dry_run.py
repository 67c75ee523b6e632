"""A dry run told: plan, voltage, time, and what the part will be held against. Nothing is energised."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from dwellbench.cli.context import Options
from dwellbench.judging.say import si
from dwellbench.limits.demands import Demand, demand, place_volts
from dwellbench.limits.limit import INSULATION, Limit
from dwellbench.limits.place import Place
from dwellbench.limits.table import limits_for
from dwellbench.part import Part
from dwellbench.plan import Plan


def tell_plan(options: Options, part: Part, place: Place | None, role: str, plan: Plan, grade: str) -> int:
    """Say or print what would be done; returns the status."""
    ruling, informative = limits_for(part, part.capacitance_F, grade)
    limits = [_limit(part, limit, True) for limit in ruling] + [
        _limit(part, one, False) for one in informative
    ]
    asked = _asked(part, place, plan)
    if options.json:
        options.document(
            {
                "part": part.as_json(),
                "role": role,
                "plan": plan.to_wire(),
                "explanation": plan.explain(),
                "place": asked,
                "limits": limits,
                "energised": False,
            }
        )
        return 0
    options.say("Nothing is energised. The plan, for the reference box:")
    for line in plan.explain():
        options.say(f"  {line}")
    _tell_place(options, place, asked)
    _tell_limits(options, limits, place)
    return 0


def _limit(part: Part, limit: Limit, rules: bool) -> dict[str, Any]:
    value = None if part.capacitance_F is None else limit.value(part.capacitance_F, part.rated_V)
    unit = "ohm" if limit.quantity == INSULATION else "A"
    named = {"id": limit.id, "source": limit.source, "status": limit.status, "rules": rules}
    return {**named, "quantity": limit.quantity, "value": value, "unit": unit, "time_s": limit.time_s}


def _asked(part: Part, place: Place | None, plan: Plan) -> dict[str, Any] | None:
    """What the place will ask of the part, at room temperature; None without a place."""
    if place is None:
        return None
    wanted: Demand | None = None
    if not place.never_fit and not place.beyond_box:
        given = replace(place, given_V=place_volts(place, part))
        wanted = demand(given, part, plan.volts_V, None, part.capacitance_F)
    named = {"id": place.kind.id, "what": place.kind.what, "source": place.kind.source}
    if wanted is None:
        return {**named, "quantity": None, "value": None, "unit": None}
    return {**named, "quantity": wanted.quantity, "value": wanted.value, "unit": wanted.unit}


def _tell_place(options: Options, place: Place | None, asked: dict[str, Any] | None) -> None:
    if place is None or asked is None:
        return
    options.say(f"The place: {place.kind.what} ({place.role}).")
    if place.never_fit:
        options.say("  No leakage test makes a part fit there; it needs one with its own safety approval.")
    elif place.beyond_box:
        options.say("  It stresses the part by pulses beyond this box: at best undecided.")
    elif asked["value"] is not None:
        way = "at most" if asked["unit"] == "A" else "at least"
        word = "leakage" if asked["unit"] == "A" else "insulation"
        options.say(f"  It asks {word} {way} {si(asked['value'], asked['unit'])}, the part at 23 C.")
    options.say(f"  {place.kind.source}")


def _tell_limits(options: Options, limits: list[dict[str, Any]], place: Place | None) -> None:
    if not limits:
        last = "." if place else "; without a place the verdict will be undecided."
        options.say("No limit is known for such a part as new" + last)
        return
    options.say("Limits for such a part as new" + (", beside the place:" if place else ":"))
    for row in limits:
        way = "at least" if row["unit"] == "ohm" else "at most"
        figure = (
            ""
            if row["value"] is None
            else f"{way} {si(row['value'], row['unit'])} after {row['time_s']:g} s; "
        )
        rules = "" if row["rules"] else ", informative"
        options.say(f"  {row['id']}: {figure}{row['source']} ({row['status']}{rules})")
