"""Budgets against the `uncertainties` library (linear propagation, JCGM 100, 5.1.2), and a published worked example."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from uncertainties import ufloat

from dwellbench.measure.budget import Line, budgets_of, combined_u, freedom_of
from dwellbench.measure.csv_read import read_csv
from dwellbench.measure.estimates import Estimates, estimate

DATA = Path(__file__).parents[1] / "measure" / "data"


def known(value: float, u: float) -> Any:
    """A variable of that library, or a plain number where nothing is in doubt."""
    return ufloat(value, u) if u > 0.0 else value


def sources(found: Estimates) -> dict[str, Any]:
    """The inputs as independent variables of that library, formed from what was read and not from any budget."""
    leak, farads, circuit = found.leakage, found.capacitance, found.circuit
    assert leak is not None
    return {
        "read": known(leak.total_A, leak.u_read_A),
        "fixture": known(leak.fixture_A, leak.u_fixture_A),
        "charging": known(leak.charging_A, leak.u_charging_A),
        "charging_A": leak.charging_A,
        "kept": known(0.0, abs(leak.charging_A)),
        "exponent": known(1.0, 0.5),
        "slope": known(leak.absorbed_A, leak.u_absorbed_A),
        "volts": leak.volts_V,
        "gain_i": known(1.0, circuit.u_gain_i),
        "gain_v": known(1.0, circuit.u_gain_v),
        "farads": None if farads is None else known(farads.value, farads.u_own),
    }


def insulation(s: dict[str, Any]) -> Any:
    through = s["read"] - s["fixture"] + s["kept"] + (s["charging"] - s["charging_A"])
    return s["gain_v"] * s["volts"] / (s["gain_i"] * through)


MODELS = {
    "total_current_A": lambda s: s["read"] * s["gain_i"],
    "leakage_A": lambda s: (
        (s["read"] - s["charging"] - s["fixture"] - s["exponent"] * s["slope"]) * s["gain_i"]
    ),
    "insulation_ohm": insulation,
    "time_constant_s": lambda s: insulation({**s, "gain_i": 1.0, "gain_v": 1.0}) * s["farads"],
}


@pytest.mark.parametrize("name", MODELS)
def test_the_same_uncertainty_as_linear_propagation_by_that_library(name: str) -> None:
    compared = 0
    for path in sorted(DATA.glob("*.csv")):
        found = estimate(read_csv(path), None, "paper")
        budgets = budgets_of(found)
        if name not in budgets:
            continue
        result = MODELS[name](sources(found))
        assert combined_u(budgets[name]) == pytest.approx(result.std_dev, rel=1e-6), path.stem
        compared += 1
    assert compared >= 2


def test_end_gauge_example() -> None:
    """JCGM 100:2008, H.1, table H.1: length of an end gauge, contributions in nanometres and their degrees of freedom; from memory.

    Combined 32 nm with 16 effective degrees of freedom.
    """
    rows = [(25.0, 18.0), (5.8, 24.0), (3.9, 5.0), (6.7, 8.0), (2.9, 50.0), (16.6, 2.0)]
    budget = tuple(Line(str(k), "nm", 0.0, u, 1.0, "B", freedom) for k, (u, freedom) in enumerate(rows))
    assert round(combined_u(budget)) == 32
    assert int(freedom_of(budget)) == 16
