"""`calibrate` as a user meets it: what is fitted is the box's own truth, it is kept, and what disagrees is questioned."""

from __future__ import annotations

import json
from pathlib import Path
from statistics import median
from typing import Any

import pytest
from tests.cli.test_commands import Run, run
from tests.helpers import ready, scenario, world

from dwellbench.calibrating import (
    calibrated,
    current,
    keep_calibration,
    measure_reference,
    next_reference,
    reference_plan,
)
from dwellbench.emulator.converters import lines
from dwellbench.emulator.reference import channels
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.fitted_scales import Known, Met, disagreements, steady
from dwellbench.records import Store

__all__ = ["run"]  # the fixture
VOLTS = (60.0, 100.0, 200.0, 300.0, 600.0)
RESISTORS = (1e7, 1e8, 1e6)
PARTS = tuple(f"capacitance_F = 1e-12\nleakage_ohm = {ohm}\n" for ohm in (1e7, *RESISTORS))
BENCH = "[operator]\nopens_after_s = 10.0\nhandling_s = 30.0\n"
NEW = "[front_end]\ncalibrated = false\n"


def metered(box: Any, volts: float) -> Met:
    """A run, and what an exact meter across the clips reads meanwhile: the truth."""
    seen = []
    for _ in (going := box.start(reference_plan(box.ratings, volts, 6.0))):
        now = world(box).truth
        if going.state == "dwell" and now.supply_on and not now.bleeding:
            seen.append(now.node_V - now.low_V)
    return Met(steady(going.raw()), median(seen[len(seen) // 2 :]), 0.003)


def fitted(folder: Path, seed: int, extra: str = NEW) -> tuple[Calibration, Any, list[dict[str, Any]]]:
    """A box calibrated on references, its true errors, and the versions that the records keep."""
    with (
        ready(scenario(folder, *PARTS, extra=BENCH + extra) + f"?seed={seed}") as box,
        Store(folder / "r.db") as store,
    ):
        last, known = current(box), []
        met = [metered(box, volts) for volts in VOLTS]
        for ohm in RESISTORS:
            next_reference(box)
            known += [
                Known(measure_reference(box, reference_plan(box.ratings, v, 6.0)), ohm, 2e-4) for v in VOLTS
            ]
        found = calibrated(box, last, met, 1e-4, known)
        keep_calibration(box, found, store)
        assert Calibration.from_json(box.calibration()) == found
        return found, world(box).errors, store.calibrations(box.identity.box)


@pytest.mark.parametrize("seed", [3, 4])
def test_what_is_fitted_is_the_box_s_own_within_its_doubt(tmp_path: Path, seed: int) -> None:
    found, errors, versions = fitted(tmp_path, seed)
    first, second = lines(errors)
    for k in (0, 1):
        true = first[channels()["part"] * 2 + k]
        assert found.volts[k].per_code * true.scale == pytest.approx(1.0, abs=3.0 * found.volts[k].u_rel)
        assert abs(found.volts[k].offset_code - true.offset) < 3.0 * found.volts[k].u_offset_code + 0.5
        assert found.volts[k].u_rel < 5e-4
    met = {level: scale for level, scale in found.amps.items() if scale.points}
    assert len(met) >= 4
    for (shunt, k), scale in met.items():
        true_per_code = 1.0 / (second[channels()["shunt"] * 2 + k].scale * errors.shunts_ohm[shunt])
        assert scale.per_code / true_per_code == pytest.approx(1.0, abs=3.0 * scale.u_rel), (shunt, k)
        assert scale.u_rel < 2e-3
    assert [version["id"] for version in versions] == [found.id]


def test_a_new_calibration_agrees_with_a_careful_one_and_not_with_one_that_is_off(tmp_path: Path) -> None:
    found, _, versions = fitted(tmp_path, 5, extra="")
    careful = Calibration.from_json({**versions[0]})
    assert disagreements(careful, found) == []
    off = Calibration.from_json(_shifted(versions[0]))
    told = disagreements(off, found)
    assert len(told) == 1
    assert "256" in told[0] or "1.024" in told[0]


def _shifted(document: dict[str, Any]) -> dict[str, Any]:
    changed: dict[str, Any] = json.loads(json.dumps(document))
    changed["volts"][0]["per_code"] *= 1.02
    return changed


METER = ("--at", "300", "--at", "600", "--meter-doubt", "0.05", "--yes")


def test_the_command_keeps_what_it_found_and_the_box_uses_it(run: Run) -> None:
    status, out, err = run(
        "--box",
        "emu://reference_resistor",
        "calibrate",
        *METER,
        "--meter",
        "299.8",
        "--meter",
        "599.6",
        "--resistor",
        "100M=0.1",
        "--accept",
        "--json",
    )
    assert status == 0, err
    document = json.loads(out)
    assert Calibration.from_json(document).as_json() == document
    assert document["volts"][0]["points"] == 2
    assert document["volts"][1].get("points", 0) == 0
    assert any(row.get("points") for row in document["amps"])


def test_one_that_disagrees_is_questioned_and_not_written(run: Run) -> None:
    status, _, err = run(
        "--box", "emu://reference_resistor", "calibrate", *METER, "--meter", "290", "--meter", "580"
    )
    assert status == 2
    assert "disagrees" in err
    assert "--accept" in err


@pytest.mark.parametrize(
    "wrong",
    [
        ("--no-meter", "--yes"),
        ("--yes",),
        ("--meter-doubt", "0.05", "--yes"),
        (*METER, "--meter", "300"),
        (*METER, "--meter", "300", "--meter", "60"),
        (*METER, "--meter", "300", "--meter", "nan"),
        ("--no-meter", "--resistor", "10M", "--yes"),
        ("--no-meter", "--resistor", "10M=0", "--yes"),
        ("--no-meter", "--resistor", "10M=0.1", "--at", "900", "--yes"),
    ],
)
def test_wrong_input_is_a_sentence(run: Run, wrong: tuple[str, ...]) -> None:
    status, _, err = run("--box", "emu://reference_resistor", "calibrate", *wrong)
    assert (status, "Traceback" in err, bool(err)) == (2, False, True), err
