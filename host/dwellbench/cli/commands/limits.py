"""`limits`: every limit a part may be judged by, and every place it may go to, with whose word each is."""

from __future__ import annotations

from typing import Any

import click
from rich.table import Table

from dwellbench.cli.context import Options, global_options
from dwellbench.cli.main import ready
from dwellbench.judging.say import si
from dwellbench.limits.limit import INSULATION, Limit
from dwellbench.limits.place import short_ohms
from dwellbench.limits.places import KINDS, PlaceKind
from dwellbench.limits.table import LIMITS, limits_for
from dwellbench.part import Part

_HELP = """List every limit with its source. "from memory" and "common practice" say what they mean: check before you rely on them.

With --part only those that speak of it, and their values for it; with --roles the places in a circuit and what each tolerates.

\b
Examples
  dwellbench limits
  dwellbench limits --part "22 uF 450V electrolytic"
  dwellbench limits --roles --json
"""

_SHAPES = {
    "greater": "the greater of {k:g} C V and {floor:g} uA",
    "plus": "{k:g} C V + {floor:g} uA",
    "root": "{k:g} sqrt(C V) + {floor:g} uA",
    "by_capacitance": "{k:g} C + {floor:g} uA",
}


@click.command("limits", help=_HELP)
@click.option(
    "--part",
    "marking",
    metavar="MARKING",
    help="Only the limits that speak of such a part, with their values for it.",
)
@click.option("--roles", is_flag=True, help="The places instead of the limits.")
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    if given["roles"]:
        return _roles(options)
    part = None if given["marking"] is None else Part.parse(given["marking"])
    rows = [described(limit, part) for limit in _chosen(part)]
    if options.json:
        options.document({"limits": rows})
        return 0
    table = Table("limit", "of", "grades", "asks", "after", "whose word")
    for row in rows:
        asks = row["rule"] + (f" = {row['here']}" if row["here"] else "")
        table.add_row(
            row["id"],
            ", ".join(row["dielectrics"]),
            ", ".join(row["grades"]),
            asks,
            f"{row['time_s']:g} s",
            _word(row),
        )
    options.console().print(table)
    options.say("C in uF, V the rated volts. Informative rows never decide by themselves.")
    return 0


def _chosen(part: Part | None) -> list[Limit]:
    if part is None:
        return list(LIMITS)
    found: dict[str, Limit] = {}
    for grade in ("new", "period", "aged"):
        ruling, beside = limits_for(part, part.capacitance_F, grade)
        found.update({limit.id: limit for limit in (*ruling, *beside)})
    return list(found.values())


def described(limit: Limit, part: Part | None) -> dict[str, Any]:
    """One limit as a document; `here` its value for the part, if there is one."""
    here = None
    if part is not None and part.capacitance_F is not None:
        value = limit.value(part.capacitance_F, part.rated_V)
        here = si(value, "ohm" if limit.quantity == INSULATION else "A")
    return {
        "id": limit.id,
        "quantity": limit.quantity,
        "rule": _rule(limit),
        "dielectrics": list(limit.dielectrics),
        "grades": list(limit.grades),
        "time_s": limit.time_s,
        "source": limit.source,
        "status": limit.status,
        "rules": limit.rules,
        "may_reject": limit.may_reject,
        "here": here,
    }


def _rule(limit: Limit) -> str:
    one, two = limit.numbers
    if limit.quantity != INSULATION:
        return "at most " + _SHAPES[limit.shape].format(k=one or 0.0, floor=two or 0.0).replace(" + 0 uA", "")
    asked = [f"{one:g} Mohm"] if one is not None else []
    asked += [f"{two:g} s (R C)"] if two is not None else []
    return "at least " + " or ".join(asked) + (", whichever is less" if len(asked) == 2 else "")


def _word(row: dict[str, Any]) -> str:
    doubt = "" if row["rules"] else "; informative"
    if not row["may_reject"]:
        doubt += "; may not condemn"
    return f"{row['source']} ({row['status']}{doubt})"


_RULES = {
    "grid_shift": "shifts the grid by at most {tolerated:g} V",
    "series_share": "insulation at least {tolerated:g} times the resistance that feeds it",
    "filter": "leakage by the period's own formula",
    "never": "no leakage test makes a part fit here",
    "pulse": "stressed by pulses beyond this box: at best undecided",
}


def _roles(options: Options) -> int:
    rows = [_place(kind) for kind in KINDS]
    if options.json:
        options.document({"roles": rows})
        return 0
    table = Table("place", "what", "highest volts", "resistance", "tolerates", "whose word")
    for kind, row in zip(KINDS, rows, strict=True):
        ohm = "" if kind.series_ohm is None else short_ohms(kind.series_ohm)
        volts = "" if kind.volts_V is None else f"{kind.volts_V:g} V"
        table.add_row(kind.id, kind.what, volts, ohm, row["tolerates"], kind.source)
    options.console().print(table)
    options.say(
        "Give your own numbers as in coupling@250V/1M. Volts and resistances here are usual ones (common practice, no source)."
    )
    return 0


def _place(kind: PlaceKind) -> dict[str, Any]:
    return {
        "id": kind.id,
        "what": kind.what,
        "rule": kind.rule,
        "volts_V": kind.volts_V,
        "series_ohm": kind.series_ohm,
        "tolerates": _RULES[kind.rule].format(tolerated=kind.tolerated or 0.0),
        "source": kind.source,
        "numbers_source": kind.numbers_source,
        "temperature_C": kind.temperature_C,
    }
