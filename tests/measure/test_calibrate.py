"""Codes to volts and amperes: scales, this run's own zero, lost rows, temperature."""

from __future__ import annotations

import numpy as np
import pytest

from dwellbench.errors import TraceError, UsageError
from dwellbench.measure.calibrate import calibrate, part_temperature_C
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.raw import COLUMNS, RawTrace

ZERO, CHARGE, DWELL = 1, 5, 6
UNSETTLED, V_CLIPPED = 1, 8
SHUNTS = (560, 100000, 1000000)


def data(**changes: object) -> dict[str, object]:
    """A calibration as the box keeps it."""
    made: dict[str, object] = {
        "schema": 1,
        "id": "0a1b2c3d",
        "box": "0011223344556677",
        "made_utc": "2026-01-05T10:00:00Z",
        "valid_days": 365,
        "temperature_C": 23.0,
        "volts": [
            {"range_mv": 1024, "per_code": 0.0313, "offset_code": 2.0, "u_rel": 0.001, "u_offset_code": 0.5},
            {"range_mv": 256, "per_code": 0.0078, "offset_code": -4.0, "u_rel": 0.001, "u_offset_code": 0.5},
        ],
        "supply": [
            {"range_mv": 1024, "per_code": 0.0314, "offset_code": 1.0, "u_rel": 0.001, "u_offset_code": 0.5},
            {"range_mv": 256, "per_code": 0.0079, "offset_code": 1.0, "u_rel": 0.001, "u_offset_code": 0.5},
        ],
        "amps": [
            {"shunt_ohm": ohm, "range_mv": mv, "per_code": mv / 1e3 / 32768 / ohm * 1.01, "u_rel": 0.002}
            for ohm in SHUNTS
            for mv in (1024, 256)
        ],
        "fixture_ohm": 2.0e12,
        "u_fixture_rel": 0.3,
    }
    return {**made, **changes}


def row(n: int, t: int, stage: int, **members: int) -> list[int]:
    usual = {"shunt": 0, "range": 0, "nv": 18, "ni": 20, "temp": 16000}
    given = {"n": n, "t": t, "stage": stage, **usual, **members}
    return [given.get(name, 0) for name in COLUMNS]


def test_every_code_becomes_its_quantity() -> None:
    raw = RawTrace.from_rows(
        [row(1, 100, DWELL, shunt=1, range=1, vrange=1, sv=18 * 1000, vmin=990, vmax=1010, si=2000, vs=501)]
    )
    trace = calibrate(raw, Calibration.from_json(data()))
    assert trace.v_part_V[0] == pytest.approx((1000 + 4) * 0.0078)
    assert trace.v_min_V[0] == pytest.approx((990 + 4) * 0.0078)
    assert trace.v_supply_V[0] == pytest.approx(500 * 0.0314)
    assert trace.i_shunt_A[0] == pytest.approx(100 * 0.256 / 32768 / 1e5 * 1.01)
    assert trace.shunt_ohm[0] == 1e5
    assert trace.range_V[0] == 0.256
    assert trace.t_s[0] == 0.1
    assert trace.stage[0] == "dwell"
    assert trace.number("fixture_ohm") == 2e12
    assert trace.number("u_gain_i") == 0.002


def test_the_zero_comes_from_this_runs_settled_zero_rows_only() -> None:
    rows = [
        row(1, 100, ZERO, shunt=2, range=1, si=9999, flags=UNSETTLED),
        row(2, 200, ZERO, shunt=2, range=1, si=-60, imin=-5, imax=-1),
        row(3, 300, DWELL, shunt=2, range=1, si=20 * 100),
        row(4, 400, DWELL, shunt=1, range=1, si=20 * 100),
    ]
    trace = calibrate(RawTrace.from_rows(rows), Calibration.from_json(data()))
    code_A = 0.256 / 32768 / 1e6 * 1.01
    assert trace.i_shunt_A[2] == pytest.approx(103 * code_A)
    assert trace.u_offset_A[2] == pytest.approx(code_A * (1 / 12 + 1.0 / 20) ** 0.5)
    assert trace.i_shunt_A[3] == pytest.approx(100 * 10 * code_A)
    assert trace.u_offset_A[3] > 1.5 * 10 * code_A, "without a zero the converter's whole offset is in doubt"
    assert trace.text("unzeroed") == "1:1"


def test_intervals_gaps_and_clipping() -> None:
    rows = [
        row(1, 30, CHARGE, nv=6, ni=6),
        row(2, 130, CHARGE, iclip=5),
        row(5, 430, CHARGE),
        row(6, 530, CHARGE, flags=V_CLIPPED),
    ]
    trace = calibrate(RawTrace.from_rows(rows))
    assert trace.interval_s == pytest.approx([0.03, 0.1, 0.1, 0.1])
    assert trace.gap.tolist() == [False, False, True, False]
    assert trace.clipped[1] == 0.25
    assert trace.readable.tolist() == [True, False, True, False]


def test_rows_twice_or_in_any_order_and_rows_without_readings() -> None:
    rows = [row(3, 300, DWELL), row(2, 200, DWELL, ni=0), row(1, 100, DWELL), row(3, 300, DWELL)]
    raw = RawTrace.from_rows(rows, {"run": 4, "end": "complete", "fault": None})
    assert raw.column("n").tolist() == [1, 2, 3]
    trace = calibrate(raw)
    assert trace.t_s.tolist() == [0.1, 0.3]
    assert trace.header["run"] == 4
    assert "fault" not in trace.header


def test_without_a_calibration_the_worst_tolerances_stand() -> None:
    trace = calibrate(RawTrace.from_rows([row(1, 100, DWELL, sv=18 * 32767)]), None)
    assert trace.text("calibration") == "nominal"
    assert trace.v_part_V[0] == pytest.approx(32767 / 32768 * 1.024 * 1001)
    assert trace.number("u_gain_v") == pytest.approx(((0.02**2 + 0.0015**2) / 3) ** 0.5)


@pytest.mark.parametrize(("ohm", "celsius"), [(10000.0, 25.0), (12488.0, 20.0), (3606.0, 50.0)])
def test_thermistor(ohm: float, celsius: float) -> None:
    """Table points of a 10 kohm, B 3977 K thermistor, from memory; the beta model is good to half a kelvin there."""
    code = round(1.000 * ohm / (ohm + 10000.0) / 1.024 * 32768)
    raw = RawTrace.from_rows(
        [row(1, 100, DWELL, temp=0), row(2, 200, DWELL, temp=code), row(3, 300, DWELL, temp=code)]
    )
    assert part_temperature_C(raw) == pytest.approx(celsius, abs=0.5)


@pytest.mark.parametrize("code", [0, 100, 31990])
def test_a_thermistor_that_is_open_or_shorted_says_nothing(code: int) -> None:
    assert part_temperature_C(RawTrace.from_rows([row(1, 100, DWELL, temp=code)])) is None


@pytest.mark.parametrize(
    "wrong",
    [
        data(schema=2),
        data(amps=[]),
        data(fixture_ohm=0),
        data(volts=[{"range_mv": 1024, "per_code": -1, "u_rel": 0.1}]),
        data(volts=[]),
        {"schema": 1},
        data(u_fixture_rel="much"),
    ],
)
def test_a_calibration_that_is_none_is_refused(wrong: dict[str, object]) -> None:
    with pytest.raises(UsageError, match="calibration cannot be used"):
        Calibration.from_json(wrong)


def test_rows_of_another_shape_are_refused() -> None:
    with pytest.raises(TraceError):
        RawTrace.from_rows([[1, 2, 3]])
    with pytest.raises(TraceError):
        RawTrace(np.zeros((2, 5), dtype=np.int64))
    assert len(RawTrace.from_rows([])) == 0
