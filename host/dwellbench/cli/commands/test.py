"""`test`: one part from its marking to a verdict and a record."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import click

from dwellbench import bench
from dwellbench.cli.budget import show_budgets
from dwellbench.cli.context import Options, global_options
from dwellbench.cli.dry_run import tell_plan
from dwellbench.cli.main import ready
from dwellbench.cli.prompts import ask_ready
from dwellbench.cli.reach import connect, open_store, settle
from dwellbench.cli.verdict import tell_outcome
from dwellbench.cli.view import View
from dwellbench.errors import UsageError
from dwellbench.limits.place import Place
from dwellbench.part import Part
from dwellbench.plan import GRADES, Plan, Ratings

_HELP = """Test one part: ask for it, run, judge, record.

MARKING is what is written on it, as the trade writes it: "47n 630V film", ".05 MFD 600 WVDC", "2A474J". What reads in more than
one way is refused with the readings to choose from.

\b
Examples
  dwellbench test "47n 630V film" --role coupling
  dwellbench test ".1 MFD 400V paper" --role coupling@310V/470k
  dwellbench test "20 MFD 450V electrolytic" --dwell 300
  dwellbench --box emu://film test "47n 630V film" --role coupling --yes
      (without a box)

With --dwell auto the run ends as soon as the verdict of the whole dwell is certain enough, never before ten seconds, never for
paper, electrolytics or unknown kinds, and on any sign of activity the whole time is held. Steady leaks are found as surely; a part
that begins to leak late may be missed. The outcome says that the dwell was cut short.

The box puts up to 650 V on the part: loose parts only, lid closed, your local codes and licensed practice first. A bulged,
leaking or cracked part is not energised. Afterwards fit a shorting wire before you lift the part out, and store it shorted.

\b
Exit status: 0 fit, 3 unfit, 4 undecided, 2 wrong input, 5 refused by the box,
6 fault, 7 no box or link lost, 8 records unusable, 130 stopped by you after
proven discharge.
"""


def _ohms(ctx: click.Context, parameter: click.Parameter, value: float | None) -> float | None:
    if value is not None and not 0.0 <= value < 1e9:  # not a number is neither
        raise UsageError(f"{value:g} ohm is no series resistance.", remedy="Say, for example, --esr 2.5.")
    return value


series_ohm = click.option(
    "--esr",
    type=float,
    metavar="OHM",
    callback=_ohms,
    help="Series resistance measured elsewhere; it goes into the outcome.",
)


@click.command("test", help=_HELP)
@click.argument("marking")
@click.option(
    "--role", default="any", metavar="PLACE", help="coupling, coupling@310V/470k, ... or any (the default)."
)
@click.option("--volts", type=float, metavar="V", help="Test at this DC voltage.")
@click.option(
    "--dwell",
    metavar="SECONDS",
    help="Time of electrification (the usual one for the kind if left out), or auto.",
)
@click.option(
    "--grade",
    type=click.Choice(GRADES),
    default="new",
    show_default=True,
    help="Which limits: of a new part, its period's, aged.",
)
@series_ohm
@click.option(
    "--looks", metavar="WORD", help=f"How it looks: {', '.join(bench.LOOKS)}. Only a sound part is energised."
)
@click.option("--section", type=int, metavar="N", help="Which section of a can, counted from 1.")
@click.option("--label", metavar="TEXT", help="Your own name for this part.")
@click.option("--note", metavar="TEXT", help="Anything worth keeping with the record.")
@click.option(
    "--dry-run",
    is_flag=True,
    help="Show plan, voltage, time and limits; nothing is energised, no box is needed.",
)
@click.option("--budget", is_flag=True, help="What makes up the uncertainty of every quantity.")
@click.option("--yes", is_flag=True, help="The part is in and the lid is closed: do not ask.")
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    bench.refuse_looks(given["looks"])
    auto = given["dwell"] == "auto"
    given["dwell"] = None if auto else _seconds(given["dwell"])
    part = chosen(Part.parse(given["marking"]), given["section"])
    role = options.places.get(given["role"], given["role"])
    place = Place.parse(role)
    tell_part(options, part)
    if given["dry_run"]:
        return tell_plan(options, part, place, role, _plan(part, place, Ratings(), given), given["grade"])
    with open_store(options) as store, connect(options) as box:
        plan = _plan(part, place, box.ratings, given)
        for line in plan.explain():
            options.say(line)
        ask_ready(options, _ask(part), yes=given["yes"])
        settle(options, box)
        with View(options, part.marking) as view:
            outcome = bench.test_part(
                box,
                part,
                place,
                store=store,
                plan=plan,
                grade=given["grade"],
                label=given["label"],
                note=given["note"],
                watcher=view,
                thresholds=options.thresholds,
                esr_ohm=given["esr"],
                role=role,
                may_end_early=auto,
            )
    if options.json:
        options.document(outcome.as_json(budgets=given["budget"]))
    else:
        tell_outcome(options, outcome)
        if given["budget"]:
            show_budgets(options, outcome)
        options.say("Fit a shorting wire before you lift the part out, and store it shorted.")
    return outcome.exit_status


def chosen(part: Part, section: int | None) -> Part:
    """Return the part, or the section of a can that is meant. UsageError when it must be said which."""
    if not part.sections:
        if section is not None:
            raise UsageError(f"{part.marking!r} has no sections.", remedy="Leave --section out.")
        return part
    count = len(part.sections)
    if section is None or not 1 <= section <= count:
        raise UsageError(
            f"{part.marking!r} is a can of {count} sections; one is tested at a time.",
            remedy=f"Say which with --section 1 to {count}; tie the unused terminals to the common negative.",
        )
    return replace(
        part.sections[section - 1], marking=f"{part.marking} (section {section})", doubts=part.doubts
    )


def tell_part(options: Options, part: Part) -> None:
    """Say what was understood of the marking, and what is in doubt."""
    for sentence in part.understood:
        options.say(f"  {sentence}")
    for doubt in part.doubts:
        options.say(f"  in doubt: {doubt}")


def _plan(part: Part, place: Place | None, ratings: Ratings, given: dict[str, Any]) -> Plan:
    return Plan.make(part, place, ratings, volts=given["volts"], dwell=given["dwell"], grade=given["grade"])


def _seconds(text: str | None) -> float | None:
    if text is None:
        return None
    try:
        return float(text)
    except ValueError:
        raise UsageError(
            f"{text!r} is not a time in seconds.", remedy="Say, for example, --dwell 60, or --dwell auto."
        ) from None


def _ask(part: Part) -> str:
    way = " Its positive lead goes to the marked clip." if part.polar else ""
    return f"Fit {part.marking} and close the lid.{way}"
