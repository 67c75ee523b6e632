"""Whole traces made by a stepped circuit (data/make_traces.py): what is measured lies within its stated bounds of the truth."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from dwellbench.measure.csv_read import read_csv
from dwellbench.measure.estimates import Estimates, estimate
from dwellbench.quantity import Quantity

DATA = Path(__file__).parent / "data"
TRUTH: dict[str, dict[str, float]] = json.loads((DATA / "truth.json").read_text("utf-8"))
DIELECTRIC = {
    "paper_2M": "paper",
    "electrolytic_forming": "electrolytic",
    "electrolytic_sound": "electrolytic",
}
DIELECTRIC |= {"mica_100p": "mica", "clipped": "paper"}
MEASURED = sorted(set(TRUTH) - {"open_lead"})


def measured(name: str) -> Estimates:
    return estimate(read_csv(DATA / f"{name}.csv"), None, DIELECTRIC.get(name, "film"))


def holds(quantity: Quantity | None, truth: float) -> bool:
    assert quantity is not None
    low = -float("inf") if quantity.low is None else quantity.low
    high = float("inf") if quantity.high is None else quantity.high
    return low <= truth <= high


@pytest.mark.parametrize("name", sorted(set(MEASURED) - {"clipped"}))
def test_capacitance_within_its_bounds(name: str) -> None:
    found = measured(name).capacitance_F()
    assert holds(found, TRUTH[name]["capacitance_F"]), (found, TRUTH[name])
    assert found is not None
    assert found.u is not None
    assert found.u < 0.05 * TRUTH[name]["capacitance_F"], "a bound so wide would say nothing"


@pytest.mark.parametrize("name", MEASURED)
def test_insulation_within_its_bounds(name: str) -> None:
    found = measured(name).insulation_ohm()
    assert holds(found, TRUTH[name]["total_ohm"]), (found, TRUTH[name])


@pytest.mark.parametrize("name", MEASURED)
def test_conduction_within_its_bounds(name: str) -> None:
    found = measured(name).leakage_A()
    assert holds(found, TRUTH[name]["conduction_A"]), (found, TRUTH[name])


@pytest.mark.parametrize("name", MEASURED)
def test_the_voltage_is_that_on_the_part(name: str) -> None:
    leak = measured(name).leakage
    assert leak is not None
    assert leak.volts_V == pytest.approx(TRUTH[name]["volts_V"], rel=2e-4)


def test_a_clipped_charging_gives_no_capacitance() -> None:
    assert measured("clipped").capacitance_F() is None
    assert measured("clipped").insulation_ohm() is not None


def test_an_open_lead_has_no_capacitance_but_a_bound() -> None:
    found = measured("open_lead").capacitance_F()
    assert found is not None
    assert found.value is None
    assert found.high is not None
    assert found.high < 1e-10


def test_only_the_bursts_are_events() -> None:
    assert measured("bursts").events.count == 4
    assert all(measured(name).events.count == 0 for name in MEASURED if name != "bursts")


def test_recovery_is_watched() -> None:
    found = measured("film_1u_step").recovery_percent
    assert found is not None
    assert found.low is not None
    loaded = 100.0 * TRUTH["film_1u_step"]["recovered_V"] / TRUTH["film_1u_step"]["volts_V"]
    assert found.value == pytest.approx(loaded, abs=0.01)


def test_class_II_is_taken_at_low_volts() -> None:
    trace = read_csv(DATA / "film_47n.csv")
    whole, low = estimate(trace, None, "film"), estimate(trace, None, "ceramic_2")
    assert whole.capacitance is not None
    assert low.capacitance is not None
    assert low.capacitance.rows < whole.capacitance.rows
    assert low.capacitance.value == pytest.approx(47e-9, rel=0.02)
