"""`zero` as a user meets it: measured, kept in the box, used by the next test, and flagged when it has expired."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from tests.cli.test_commands import FILM_ARGS, Run, run
from tests.helpers import FILM, OPEN, fault, ready, scenario, world

from dwellbench.measure.zero import Zero
from dwellbench.plan import Plan
from dwellbench.records import Store
from dwellbench.zeroing import keep_zero, measure_zero

__all__ = ["run"]  # the fixture


def told(out: str) -> dict[str, Any]:
    document: dict[str, Any] = json.loads(out)
    return document


def test_a_zero_is_taken_off_by_the_next_test_which_says_how_old_it_is(run: Run, tmp_path: Path) -> None:
    url = scenario(tmp_path, OPEN, FILM) + f"?seed=5&state={tmp_path / 'box.json'}"
    status, out, err = run("--box", url, "zero", "--volts", "630", "--humidity", "45", "--yes", "--json")
    zero = told(out)["zero"]
    assert status == 0
    assert zero["humidity_percent"] == 45.0
    assert "Open the lid" in err
    status, out, _ = run("--box", url, *FILM_ARGS, "--json")
    outcome = told(out)
    assert (status, outcome["verdict"]) == (0, "fit")
    assert any(note.startswith("Empty fixture:") and zero["made_utc"] in note for note in outcome["notes"])
    assert "stale_zero" not in [finding["id"] for finding in outcome["findings"]]


def test_the_zero_that_is_found_is_the_fixture_s_own(tmp_path: Path) -> None:
    for seed in (1, 2, 3, 4, 5):
        with ready(scenario(tmp_path, OPEN) + f"?seed={seed}") as box:
            zero = measure_zero(box, Plan.empty(box.ratings, 500.0, 30.0))
            true_ohm = world(box).errors.fixture_ohm
        assert abs(zero.ohm - true_ohm) < 3.0 * zero.u_rel * zero.ohm
        assert zero.u_rel < 0.25  # of a fixture never measured it is 0.5


def test_an_expired_zero_is_flagged_and_every_version_is_kept(tmp_path: Path) -> None:
    with ready(scenario(tmp_path, OPEN, FILM) + "?seed=5") as box, Store(tmp_path / "r.db") as store:
        fresh = measure_zero(box, Plan.empty(box.ratings, 630.0, 10.0))
        old = Zero(fresh.volts_V, fresh.ohm, fresh.u_rel, "2026-01-01T00:00:00Z")
        keep_zero(box, old, store)
        box.wait_for(lambda now: now["lid"] == "closed", 120.0)
        outcome = box.test("47n 630V film", "coupling@310V/470k", store)
        kept = store.calibrations(box.identity.box)
    assert "stale_zero" in [finding.id for finding in outcome.findings]
    assert [version["zeros"][0]["made_utc"] for version in kept] == [old.made_utc]


@pytest.mark.parametrize(
    ("body", "extra", "says"),
    [
        (FILM, "", "something is between the clips"),
        ("leakage_ohm = 1e8\ncapacitance_F = 1e-12\n", "", "not a clean"),
    ],
)
def test_what_is_not_empty_is_not_taken_for_the_fixture(
    run: Run, tmp_path: Path, body: str, extra: str, says: str
) -> None:
    status, _, err = run("--box", scenario(tmp_path, body, extra=extra), "zero", "--yes")
    assert status == 2
    assert says in err


def test_a_lid_that_is_opened_during_the_run_is_a_fault(run: Run, tmp_path: Path) -> None:
    status, _, _ = run(
        "--box", scenario(tmp_path, OPEN, extra=fault("lid_open", 10.0, for_s=5.0)), "zero", "--yes"
    )
    assert status == 6


@pytest.mark.parametrize(
    "wrong",
    [("--humidity", "101"), ("--valid", "0"), ("--volts", "900"), ("--volts", "nan"), ("--dwell", "0")],
)
def test_wrong_numbers_are_sentences(run: Run, wrong: tuple[str, str]) -> None:
    status, _, err = run("--box", "emu://empty", "zero", "--yes", *wrong)
    assert (status, "Traceback" in err, bool(err)) == (2, False, True)
