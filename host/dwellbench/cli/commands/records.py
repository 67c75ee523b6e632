"""`records`: what was tested, and what came of it."""

from __future__ import annotations

from typing import Any

import click
from rich.table import Table

from dwellbench.cli.context import global_options, take
from dwellbench.cli.main import ready, tell_commands
from dwellbench.cli.reach import open_store
from dwellbench.errors import UsageError
from dwellbench.outcome import VERDICTS


@click.group("records", invoke_without_command=True)
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> None:
    """Look into the records: list, show.

    \b
    Examples
      dwellbench records list --verdict unfit --text paper
      dwellbench records show R17 --json
    """
    take(ctx.obj, given)
    if ctx.invoked_subcommand is None:
        tell_commands(ctx)


_LIST = """List records, newest first.

\b
Examples
  dwellbench records list
  dwellbench records list --text "630V" --verdict fit --limit 20
  dwellbench records list --since 2026-01-01 --json
"""


@command.command("list", help=_LIST)
@click.option("--text", metavar="TEXT", help="In label, marking or note.")
@click.option("--verdict", type=click.Choice(VERDICTS), help="Only these.")
@click.option("--label", metavar="TEXT", help="Exactly this label.")
@click.option("--since", metavar="DATE", help="Begun on this day (UTC) or later, as 2026-01-31.")
@click.option("--until", metavar="DATE", help="Begun before this day (UTC).")
@click.option("--from-box", "from_box", metavar="ID", help="Made on this box.")
@click.option("--limit", type=click.IntRange(1, 10000), default=50, show_default=True, help="How many.")
@click.option("--offset", type=click.IntRange(0), default=0, help="Skip so many, for the next page.")
@global_options
@click.pass_context
def list_(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    where = {key: given[key] for key in ("text", "verdict", "label")}
    where.update(since=_day(given["since"]), until=_day(given["until"]), box=given["from_box"])
    with open_store(options) as store:
        found = store.records(given["limit"], given["offset"], **where)
        total = store.count(**where)
    if options.json:
        options.document(
            {"records": [one.as_json() for one in found], "total": total, "offset": given["offset"]}
        )
        return 0
    table = Table("record", "begun (UTC)", "label", "marking", "place", "verdict", "end")
    for one in found:
        end = one.fault or one.end or one.state
        simulated = " (simulated)" if one.simulated else ""
        table.add_row(
            one.name,
            one.started_utc,
            one.label or "",
            one.marking,
            one.role or "",
            (one.verdict or "none") + simulated,
            end,
        )
    options.console().print(table)
    options.say(f"{len(found)} of {total} records in {options.records_path}.")
    return 0


def _day(text: str | None) -> str | None:
    if text is None:
        return None
    from datetime import date

    try:
        return date.fromisoformat(text).isoformat()
    except ValueError:
        raise UsageError(f"{text!r} is not a day.", remedy="Write it as 2026-01-31.") from None


_SHOW = """Show one record: what was planned, what happened, what came of it.

\b
Examples
  dwellbench records show R17
  dwellbench records show 17 --json
"""


@command.command("show", help=_SHOW)
@click.argument("record")
@global_options
@click.pass_context
def show(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    with open_store(options) as store:
        found = store.record(given["record"])
    if options.json:
        options.document(found)
        return 0
    for line in _described(found):
        options.say(line)
    return 0


def _described(record: dict[str, Any]) -> list[str]:
    told = [
        f"{record['record']}: {record['marking']}" + (f", label {record['label']}" if record["label"] else "")
    ]
    told.append(
        f"  begun {record['started_utc']}, {record['state']}, {record['sample_count']} rows of samples"
    )
    told.append(
        f"  box {record['box']} ({record['model']}), firmware {record['firmware']} build {record['build']}"
    )
    if record["simulated"]:
        told.append("  simulated: made on an emulated box, not on a real part")
    if record["why"]:
        told.append(f"  {record['why']}")
    if record["note"]:
        told.append(f"  note: {record['note']}")
    for event in record["events"]:
        if event["kind"] == "state":
            told.append(
                f"  {event['t'] / 1000:8.1f} s  {event['state']}"
                + (f" ({event['why']})" if event["why"] else "")
            )
        elif event["kind"] == "fault":
            told.append(f"  {event['t'] / 1000:8.1f} s  fault {event['fault']}")
    for outcome in record["outcomes"]:
        told.append(f"  {outcome['verdict']}: {outcome['reason']}")
        told += [f"    found: {finding['id']}. {finding['evidence']}" for finding in outcome["findings"]]
    if not record["outcomes"]:
        told.append("  no outcome: nothing was judged")
    return told
