"""`demo`: a bin of invented parts on the emulated box, from charge to verdict, in virtual time."""

from __future__ import annotations

import tempfile
from pathlib import Path
from typing import Any

import click
from rich.table import Table

from dwellbench import bench
from dwellbench.cli import say
from dwellbench.cli.context import Options, global_options
from dwellbench.cli.main import ready
from dwellbench.cli.reach import connect, open_store
from dwellbench.emulator.part_spec import PartSpec
from dwellbench.emulator.scenario import Scenario
from dwellbench.errors import BugError
from dwellbench.limits.place import Place
from dwellbench.outcome import Outcome
from dwellbench.part import Part
from dwellbench.plan import Plan

_FOR_THE_NEXT_S = 120.0  # the operator's handling, and then some

_HELP = """Work through a bin of invented parts on an emulated box: the real firmware, the real wire, real physics, virtual time.

Every part has an invented truth (sound, leaky, shorted, open, still forming ...); the table at the end sets the verdict beside it.
Records go into a fresh folder that is named, unless --records says where. Everything in them is simulated.

\b
Examples
  dwellbench demo
  dwellbench demo --records demo.db --json
"""


@click.command("demo", help=_HELP)
@click.option("--seed", type=int, default=7, show_default=True, help="Seed of all chance.")
@click.option(
    "--interpreter",
    type=click.Choice(("cpython", "micropython")),
    default="cpython",
    show_default=True,
    help="Who runs the firmware.",
)
@click.option("--strict", is_flag=True, help="End with the status of the worst part.")
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    if options.records is None:
        options.records = Path(tempfile.mkdtemp(prefix="dwellbench-demo-")) / "records.db"
    options.box = f"emu://demo?seed={given['seed']}&interpreter={given['interpreter']}"
    specs = Scenario.load("demo").parts
    options.say(f"Records go to {options.records}.")
    outcomes = _work_through(options, specs)
    _report(options, specs, outcomes)
    return max((outcome.exit_status for outcome in outcomes), default=0) if given["strict"] else 0


def _work_through(options: Options, specs: tuple[PartSpec, ...]) -> list[Outcome]:
    outcomes = []
    with open_store(options) as store, connect(options) as box:
        for number, spec in enumerate(specs, 1):
            box.settle()
            box.wait_for(lambda now: now["lid"] == "closed", _FOR_THE_NEXT_S)
            part, place = Part.parse(spec.marking), Place.parse(spec.role or "any")
            plan = Plan.make(part, place, box.ratings)
            outcome = bench.test_part(
                box, part, place, store=store, plan=plan, label=spec.label, role=spec.role or "any"
            )
            outcomes.append(outcome)
            _tell(options, number, len(specs), spec, outcome)
            if (
                number < len(specs)
                and box.wait_for(lambda now: now["lid"] == "open", _FOR_THE_NEXT_S) is None
            ):
                raise BugError(
                    "The emulated operator did not take the part out.",
                    remedy="Run it again with --wire-log FILE.",
                )
    return outcomes


def _tell(options: Options, number: int, count: int, spec: PartSpec, outcome: Outcome) -> None:
    if options.json:
        line = {"event": "part", "number": number, "count": count, "label": spec.label, "expect": spec.expect}
        options.document({**line, "outcome": outcome.as_json()}, line=True)
    options.say(f"{number:2}/{count}  {spec.label}  {spec.marking}: {say.word(outcome)}. {outcome.reason}")


def _report(options: Options, specs: tuple[PartSpec, ...], outcomes: list[Outcome]) -> None:
    right = sum(outcome.verdict == spec.expect for spec, outcome in zip(specs, outcomes, strict=True))
    if options.json:
        options.document(
            {
                "event": "summary",
                "parts": len(outcomes),
                "as_expected": right,
                "records": str(options.records),
            },
            line=True,
        )
        return
    table = Table(
        "label",
        "marking",
        "place",
        "invented truth",
        "verdict",
        "what next",
        title="A bin of invented parts (simulated)",
    )
    for spec, outcome in zip(specs, outcomes, strict=True):
        mark = "" if outcome.verdict == spec.expect else f" (expected {spec.expect})"
        table.add_row(
            spec.label,
            spec.marking,
            (spec.role or "any").replace("_", " "),
            spec.note or "",
            outcome.verdict + mark,
            say.next_words(outcome),
        )
    options.console().print(table)
    options.say(
        f"{right} of {len(outcomes)} verdicts are right for their invented truth. Everything here is simulated."
    )
    options.say(f"Look at one: dwellbench --records {options.records} records show R1")
