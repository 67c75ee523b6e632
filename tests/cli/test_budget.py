"""`--budget`: the table for people, and `budgets` in the document, only when asked for."""

from __future__ import annotations

import json
from math import hypot
from pathlib import Path

import fastjsonschema
import pytest
from tests.cli.test_commands import FILM_ARGS, OUTCOME, Run, run

__all__ = ["run"]  # the fixture
TRACE = Path(__file__).parents[1] / "measure" / "data" / "paper_2M.csv"
ANALYSE = ("analyse", str(TRACE), "--part", ".1 MFD 400V paper", "--role", "coupling@250V/470k")


def test_the_budgets_of_a_test_add_up_in_the_document(run: Run) -> None:
    _, out, _ = run("--box", "emu://film", *FILM_ARGS, "--budget", "--json")
    outcome = json.loads(out)
    fastjsonschema.compile(OUTCOME)(outcome)
    stated = {
        name for name, value in outcome.items() if isinstance(value, dict) and value.get("u") is not None
    }
    assert set(outcome["budgets"]) == stated
    assert {"capacitance_F", "total_current_A"} <= stated
    for name, lines in outcome["budgets"].items():
        assert hypot(*(line["contribution"] for line in lines)) == pytest.approx(outcome[name]["u"]), name


def test_the_grid_s_shift_has_the_insulation_s_sources(run: Run) -> None:
    _, out, _ = run(*ANALYSE, "--budget", "--json")
    outcome = json.loads(out)
    budgets = outcome["budgets"]
    assert [line["source"] for line in budgets["grid_shift_V"]] == [
        line["source"] for line in budgets["insulation_ohm"]
    ]
    shift = hypot(*(line["contribution"] for line in budgets["grid_shift_V"]))
    assert shift == pytest.approx(outcome["grid_shift_V"]["u"])


def test_people_get_a_table_for_each_quantity_and_nobody_who_did_not_ask(run: Run) -> None:
    _, out, _ = run(*ANALYSE, "--budget")
    assert "insulation [ohm]" in out
    assert "gain of the current" in out
    assert out.count("combined") >= 5
    _, out, _ = run(*ANALYSE)
    assert "combined" not in out
    _, out, _ = run(*ANALYSE, "--json")
    assert "budgets" not in json.loads(out)
