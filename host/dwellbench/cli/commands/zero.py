"""`zero`: what the empty fixture leaks, so that it can be taken off what a part is found to leak."""

from __future__ import annotations

from typing import Any

import click

from dwellbench.bench import Bench
from dwellbench.cli.context import global_options
from dwellbench.cli.main import ready
from dwellbench.cli.prompts import ask_ready
from dwellbench.cli.reach import connect, open_store
from dwellbench.errors import UsageError
from dwellbench.judging.say import si, volts
from dwellbench.measure.zero import VALID_H
from dwellbench.plan import Plan
from dwellbench.zeroing import keep_zero, measure_zero

_HELP = """Measure the empty fixture's own leakage, at the voltage that parts will be tested at, and keep it in the box.

Take out the part, clean and dry the clips, close the lid. Afterwards open the lid: the box takes it only then. Tests at the
same voltage (within a tenth) take it off, say how old it was, and flag it when it has expired.

\b
Examples
  dwellbench zero                                   at the highest voltage of the box
  dwellbench zero --volts 400 --humidity 55         with the room's humidity, for the record
  dwellbench --box emu://empty zero --yes           without a box

\b
Exit status: 0 done, 2 wrong input or a fixture that is not empty and clean, 5 refused by the box, 6 fault, 7 no box or link lost.
"""


@click.command("zero", help=_HELP)
@click.option(
    "--volts", type=float, metavar="V", help="At this DC voltage; the highest of the box if left out."
)
@click.option(
    "--dwell", type=float, default=60.0, show_default=True, metavar="SECONDS", help="Time at voltage."
)
@click.option(
    "--humidity", type=float, metavar="PERCENT", help="Relative humidity of the room, from another meter."
)
@click.option(
    "--valid",
    type=float,
    default=VALID_H,
    show_default=True,
    metavar="HOURS",
    help="How long it is to be believed.",
)
@click.option("--yes", is_flag=True, help="The fixture is empty and the lid is closed: do not ask.")
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    _check(given)
    with open_store(options) as store, connect(options) as box:
        plan = Plan.empty(box.ratings, _volts(given, box), given["dwell"])
        for line in plan.explain():
            options.say(line)
        ask_ready(options, "Leave the fixture empty and close the lid.", yes=given["yes"])
        box.settle()
        zero = measure_zero(box, plan, humidity_percent=given["humidity"], valid_h=given["valid"])
        options.say("Open the lid, so that the box can keep it.")
        keep_zero(box, zero, store)
    if options.json:
        options.document({"box": box.identity.box, "zero": zero.as_json()})
        return 0
    doubt = si(zero.ohm * zero.u_rel, "ohm", 2)
    found = (
        f"{si(zero.ohm, 'ohm')}, standard uncertainty {doubt}"
        if zero.u_rel < 1.0
        else f"above {si(zero.ohm, 'ohm')}"
    )
    options.say(
        f"The empty fixture insulates {found}, at {volts(zero.volts_V)}; kept in the box for {zero.valid_h:g} h."
    )
    return 0


def _volts(given: dict[str, Any], box: Bench) -> float:
    volts_V: float | None = given["volts"]
    return box.ratings.volts_V if volts_V is None else volts_V


def _check(given: dict[str, Any]) -> None:
    """UsageError for numbers that cannot be."""
    humidity = given["humidity"]
    if humidity is not None and not 0.0 <= humidity <= 100.0:
        raise UsageError(
            f"{humidity:g} % is no relative humidity.", remedy="Give 0 to 100, or leave --humidity out."
        )
    if not 0.0 < given["valid"] <= 8760.0:
        raise UsageError(
            f"A zero cannot be valid for {given['valid']:g} h.", remedy="Give more than 0, at most 8760."
        )
