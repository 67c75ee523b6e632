"""`analyse`: the same computing on a recorded trace, no box needed."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from dwellbench.cli.budget import show_budgets
from dwellbench.cli.commands.test import chosen, series_ohm, tell_part
from dwellbench.cli.context import global_options
from dwellbench.cli.main import ready
from dwellbench.cli.verdict import tell_outcome
from dwellbench.errors import UsageError
from dwellbench.judge import analyse
from dwellbench.measure.csv_read import read_csv
from dwellbench.part import Part
from dwellbench.plan import GRADES

_HELP = """Judge a recorded trace as if its run had just ended. No box is needed and nothing is energised.

TRACE is a CSV file with the columns t_s, stage, shunt_ohm, v_part_V, i_shunt_A, v_supply_V (clipped and others optional); lines
"# key = value" before the header say what box it came from. What they leave out is the reference box's, and the outcome says so.

\b
Examples
  dwellbench analyse run.csv --part "100n 400V polyester"
  dwellbench analyse run.csv --part "100n 400V polyester" --role coupling@310V/470k --json

\b
Exit status: 0 fit, 3 unfit, 4 undecided, 2 wrong input.
"""


@click.command("analyse", help=_HELP)
@click.argument("trace", type=click.Path(path_type=Path))
@click.option(
    "--part", "marking", metavar="MARKING", help="What is written on the part; the trace may say it itself."
)
@click.option("--role", metavar="PLACE", help="coupling, coupling@310V/470k, ... or any.")
@click.option("--grade", type=click.Choice(GRADES), default="new", show_default=True, help="Which limits.")
@series_ohm
@click.option("--section", type=int, metavar="N", help="Which section of a can, counted from 1.")
@click.option("--budget", is_flag=True, help="What makes up the uncertainty of every quantity.")
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    trace = read_csv(given["trace"])
    marking = given["marking"] or trace.text("marking")
    if not marking:
        raise UsageError(
            f"{given['trace']} does not say what part it is of.", remedy="Say it with --part MARKING."
        )
    part = chosen(Part.parse(marking), given["section"])
    tell_part(options, part)
    role = given["role"] or trace.text("role")
    role = options.places.get(role, role) if role else None
    outcome = analyse(
        trace, part, role, grade=given["grade"], thresholds=options.thresholds, esr_ohm=given["esr"]
    )
    if options.json:
        options.document(outcome.as_json(budgets=given["budget"]))
    else:
        tell_outcome(options, outcome)
        if given["budget"]:
            show_budgets(options, outcome)
    return outcome.exit_status
