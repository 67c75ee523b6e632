"""Direct traces: form of the rows, and that the numbers in them are the part's."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import pytest

from dwellbench.emulator.direct import record, trace
from dwellbench.emulator.forming import Forming
from dwellbench.emulator.part_spec import LateLeak, PartSpec
from dwellbench.emulator.reference import flags, stages

ZERO, CHARGE, DWELL, DISCHARGE = (stages()[name] for name in ("zero", "charge", "dwell", "discharge"))
QUIET = {"ideal": True}
FILM = PartSpec(capacitance_F=47e-9, leakage_ohm=2e10, absorption=((0.1, 8e-4), (1.0, 8e-4), (10.0, 8e-4)))
N, T, STAGE, SHUNT, RANGE, NV, SV, VMIN, VMAX, NI, SI, IMIN, IMAX, ICLIP, VS, TEMP, FLAGS, VRANGE = range(18)


def amps(row: list[int], calibration: dict, zeros: dict) -> float:
    """Current of a row: mean code less the zero of its level, times the calibration."""
    level = row[SHUNT], row[RANGE]
    per_code = calibration["amps"][row[SHUNT] * 2 + row[RANGE]]["per_code"]
    return (row[SI] / row[NI] - zeros[level]) * per_code


def zeros_of(rows: list[list[int]]) -> dict:
    return {
        (r[SHUNT], r[RANGE]): r[SI] / r[NI] for r in rows if r[STAGE] == ZERO
    }  # the later window of two stays


def test_rows_have_the_ring_s_form():
    rows = trace(FILM, 400.0, 3.0, 1)
    assert all(len(row) == 18 and all(type(value) is int for value in row) for row in rows)
    assert [row[N] for row in rows] == list(range(1, len(rows) + 1))
    assert all(a[T] < b[T] <= a[T] + 100 for a, b in pairwise(rows))
    assert all(
        row[NV] == 18 and 19 <= row[NI] <= 20 for row in rows if not row[FLAGS] & flags()["short_window"]
    )
    assert all(row[VMIN] * row[NV] <= row[SV] <= row[VMAX] * row[NV] for row in rows)
    assert all(row[IMIN] * row[NI] <= row[SI] <= row[IMAX] * row[NI] for row in rows)
    order = [row[STAGE] for row in rows]
    assert order == sorted(order) and set(order) == {ZERO, CHARGE, DWELL, DISCHARGE}
    assert {(r[SHUNT], r[RANGE]) for r in rows if r[STAGE] == ZERO} == {
        (s, k) for s in range(3) for k in range(2)
    }


def test_same_seed_same_rows():
    assert trace(FILM, 400.0, 2.0, 4) == trace(FILM, 400.0, 2.0, 4) != trace(FILM, 400.0, 2.0, 5)


@pytest.mark.parametrize("ohm", [2e9, 2e10, 2e11])
def test_the_last_current_is_what_flows(ohm):
    got = record(replace(FILM, leakage_ohm=ohm), 500.0, 20.0, 3)
    last = [row for row in got.rows if row[STAGE] == DWELL][-3:]
    zeros = zeros_of(got.rows)
    mean = sum(amps(row, got.calibration, zeros) for row in last) / len(last)
    assert mean == pytest.approx(got.shunt_A, rel=0.01, abs=1e-11)
    assert got.leakage_A == pytest.approx(got.part_V / ohm, rel=1e-9)
    assert got.shunt_A > got.leakage_A
    assert not any(row[FLAGS] & flags()["unsettled"] for row in last)


@pytest.mark.parametrize("farad", [1e-9, 47e-9, 2.2e-6])
def test_charge_over_voltage_is_the_capacitance(farad):
    part = PartSpec(capacitance_F=farad)
    got = record(part, 400.0, 2.0, 3, settings=QUIET)
    zeros = zeros_of(got.rows)
    charging = [row for row in got.rows if row[STAGE] == CHARGE]
    if farad > 250e-9:  # by step: all the charge, over the voltage reached
        coulomb = sum(amps(row, got.calibration, zeros) * 0.1 for row in charging)
        volts = charging[-1][VMAX] * got.calibration["volts"][0]["per_code"]
        found = coulomb / volts
    else:  # by ramp: current over slope
        steady = [row for row in charging if row[FLAGS] == flags()["ramp"]][10:-2]
        found = sum(amps(row, got.calibration, zeros) for row in steady) / len(steady) / 100.0
    assert found == pytest.approx(farad + 2e-12, rel=0.02)


def test_forming_late_and_settings_reach_the_circuit():
    old = PartSpec(capacitance_F=4.7e-6, forming=Forming(formed_V=200.0, limit_V=450.0))
    got = record(old, 400.0, 10.0, 1)
    assert got.part_V < 390.0 and got.leakage_A > 1e-5
    late = PartSpec(capacitance_F=1e-8, late_leak=LateLeak(after_s=6.0, ohm=1e8))
    assert record(late, 400.0, 1.0, 1).leakage_A < 1e-9 < 1e-6 < record(late, 400.0, 4.0, 1).leakage_A
    one = record(FILM, 400.0, 1.0, 1, box_seed=9)
    assert one.calibration == record(FILM, 400.0, 1.0, 2, box_seed=9).calibration
    assert one.rows != record(FILM, 400.0, 1.0, 2, box_seed=9).rows
