"""Budgets add up to what is stated, for every quantity of every kind of trace."""

from __future__ import annotations

from dataclasses import replace
from math import inf
from pathlib import Path

import pytest

from dwellbench.measure.budget import Line, budgets_of, combined_u, freedom_of
from dwellbench.measure.csv_read import read_csv
from dwellbench.measure.estimates import Estimates, estimate
from dwellbench.quantity import Quantity

DATA = sorted((Path(__file__).parent / "data").glob("*.csv"))
NAMES = (
    *("capacitance_F", "total_current_A", "leakage_A", "insulation_ohm", "time_constant_s"),
    *("absorption_ratio", "polarisation_index", "recovery_percent"),
)


def stated(found: Estimates, name: str) -> Quantity | None:
    value = getattr(found, name)
    quantity: Quantity | None = value() if callable(value) else value
    return quantity


@pytest.mark.parametrize("path", DATA, ids=lambda path: path.stem)
@pytest.mark.parametrize("dielectric", ["polyester", "paper", "ceramic_2"])
def test_contributions_add_up_in_squares_to_the_stated_uncertainty(path: Path, dielectric: str) -> None:
    found = estimate(read_csv(path), None, dielectric)
    budgets = budgets_of(found)
    for name in NAMES:
        quantity = stated(found, name)
        if quantity is None or quantity.u is None:
            assert name not in budgets
        else:
            assert combined_u(budgets[name]) == pytest.approx(quantity.u, rel=1e-9), name


def test_every_quantity_has_its_budget_somewhere() -> None:
    seen = {name for path in DATA for name in budgets_of(estimate(read_csv(path), None, "paper"))}
    assert seen >= set(NAMES) - {"polarisation_index"}


def test_a_larger_gain_doubt_shows_in_the_gain_s_line_alone() -> None:
    trace = read_csv(DATA[-1])
    more = replace(trace, header={**trace.header, "u_gain_i": 0.05})
    before, after = (budgets_of(estimate(one, None, "paper"))["total_current_A"] for one in (trace, more))
    changed = [
        a.source
        for a, b in zip(before, after, strict=True)
        if a.contribution != pytest.approx(b.contribution)
    ]
    assert changed == ["gain of the current"]


def test_effective_degrees_of_freedom() -> None:
    noisy, exact = Line("a", "V", 1.0, 3.0, 1.0, "A", 4.0), Line("b", "V", 1.0, 4.0, -1.0, "B")
    assert combined_u((noisy, exact)) == 5.0
    assert freedom_of((noisy, exact)) == pytest.approx(5.0**4 / (3.0**4 / 4.0))
    assert freedom_of((exact,)) == inf
