"""Uncertainty budgets as tables for people."""

from __future__ import annotations

from rich.table import Table

from dwellbench.cli.context import Options
from dwellbench.measure.budget import Budget, combined_u, freedom_of
from dwellbench.outcome import Outcome

_COLUMNS = ("source", "value", "u", "sensitivity", "contribution", "type", "degrees of freedom")


def show_budgets(options: Options, outcome: Outcome) -> None:
    """One table for each quantity that has a standard uncertainty."""
    console = options.console()
    for name, budget in outcome.budgets.items():
        console.print(table_of(name, budget))
    if not outcome.budgets:
        options.say("No quantity has a standard uncertainty; bounds have no budget.")


def table_of(name: str, budget: Budget) -> Table:
    """The budget, largest contribution first, with the combined uncertainty below."""
    what, _, unit = name.rpartition("_") if name.rpartition("_")[2] in _UNITS else (name, "", "")
    table = Table(title=f"{what.replace('_', ' ')} [{unit or '1'}]".replace("[", "\\["), title_justify="left")
    for column in _COLUMNS:
        table.add_column(column, justify="left" if column == "source" else "right")
    for line in sorted(budget, key=lambda row: -row.contribution):
        table.add_row(
            line.source,
            f"{line.value:.5g}{_unit(line.unit)}",
            f"{line.u:.2g}{_unit(line.unit)}",
            f"{line.sensitivity:.3g}",
            f"{line.contribution:.2g}",
            line.kind,
            _freedom(line.freedom),
        )
    table.add_section()
    table.add_row("combined", "", "", "", f"{combined_u(budget):.2g}", "", _freedom(freedom_of(budget)))
    return table


_MANY = 10000.0  # the t-factor is the normal one to four digits
_UNITS = ("F", "A", "ohm", "s", "V", "percent")


def _unit(unit: str) -> str:
    return "" if unit == "1" else f" {unit}"


def _freedom(degrees: float | None) -> str:
    return "infinite" if degrees is None or degrees > _MANY else f"{degrees:.0f}"
