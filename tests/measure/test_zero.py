"""The empty fixture's zero: what is made of a reading, which one is used, and what age does to it."""

from __future__ import annotations

from dataclasses import replace

import pytest
from tests.measure.test_calibrate import data, row

from dwellbench.errors import UsageError
from dwellbench.measure.calibrate import calibrate
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.leakage import Leakage
from dwellbench.measure.raw import RawTrace
from dwellbench.measure.reference import FIXTURE_U_REL
from dwellbench.measure.zero import Zero, nearest, with_zero, zero_of

READ = Leakage(
    time_s=30.0,
    volts_V=500.0,
    total_A=1e-9,
    u_read_A=3e-12,
    charging_A=0.0,
    u_charging_A=4e-12,
    fixture_A=0.0,
    u_fixture_A=0.0,
    absorbed_A=0.0,
    u_absorbed_A=0.0,
    slope_per_s=0.0,
    rises=False,
    shunt_ohm=1e6,
    rows=40,
)
MADE = "2026-03-01T10:00:00Z"
ZERO = Zero(500.0, 8e11, 0.02, MADE)


def test_a_zero_is_volts_over_current_with_every_doubt_in_it() -> None:
    zero = zero_of(READ, 0.012, made_utc=MADE, temperature_C=22.0, humidity_percent=40.0)
    assert (zero.ohm, zero.volts_V, zero.temperature_C, zero.humidity_percent) == (5e11, 500.0, 22.0, 40.0)
    assert zero.u_rel == pytest.approx(0.013)  # sqrt(3^2 + 4^2 + 12^2) pA of 1 nA


def test_a_current_below_its_doubt_gives_a_bound_that_is_wholly_in_doubt() -> None:
    zero = zero_of(replace(READ, total_A=-2e-12), 0.0, made_utc=MADE)
    assert (zero.ohm, zero.u_rel) == (500.0 / 5e-12, 1.0)


@pytest.mark.parametrize("leak", [None, replace(READ, total_A=1e-6)])
def test_what_is_no_clean_empty_fixture_is_refused(leak: Leakage | None) -> None:
    with pytest.raises(UsageError):
        zero_of(leak, 0.001, made_utc=MADE)


def test_the_zero_of_the_same_voltage_is_used_and_the_latest_of_those() -> None:
    older, other = replace(ZERO, made_utc="2026-02-01T10:00:00Z", volts_V=510.0), replace(ZERO, volts_V=100.0)
    assert nearest((older, other, ZERO), 520.0) is ZERO
    assert nearest((older, other, ZERO), 90.0) is other
    assert nearest((), 90.0) is None


def test_a_document_keeps_one_zero_a_voltage_and_all_else_it_held() -> None:
    first = with_zero(data(), "0011223344556677", ZERO)
    second = with_zero(first, "0011223344556677", replace(ZERO, volts_V=510.0, ohm=9e11))
    third = with_zero(second, "0011223344556677", replace(ZERO, volts_V=100.0))
    assert [zero.ohm for zero in Calibration.from_json(third).zeros] == [9e11, 8e11]
    assert {key: third[key] for key in data()} == data()


def test_a_box_without_a_calibration_keeps_its_zeros_and_stays_nominal() -> None:
    read = Calibration.from_json(with_zero(None, "0011223344556677", ZERO))
    assert read.nominal
    assert read.zeros == (ZERO,)
    assert read.volts == Calibration.without().volts


@pytest.mark.parametrize("broken", [{"ohm": -1.0}, {"made_utc": None}, {"u_rel": "x"}, {"volts_V": 0.0}])
def test_a_broken_zero_is_a_sentence(broken: dict[str, object]) -> None:
    zeros = [{**ZERO.as_json(), **broken}] if broken != {"made_utc": None} else [{"volts_V": 1.0}]
    with pytest.raises(UsageError, match="calibration cannot be used"):
        Calibration.from_json(data(zeros=zeros))


@pytest.mark.parametrize(
    ("asked_V", "now", "u_rel", "stale"),
    [
        (500.0, "2026-03-01T13:00:00Z", 0.02, False),
        (460.0, "2026-03-02T09:59:00Z", 0.02, False),
        (500.0, "2026-03-02T10:01:00Z", FIXTURE_U_REL, True),
        (500.0, "2026-02-28T10:00:00Z", FIXTURE_U_REL, True),  # made in the future: a clock is wrong
        (400.0, "2026-03-01T13:00:00Z", FIXTURE_U_REL, False),  # another voltage
        (500.0, None, 0.02, False),
    ],
)
def test_a_zero_is_believed_at_its_voltage_and_while_it_is_fresh(
    asked_V: float, now: str | None, u_rel: float, stale: bool
) -> None:
    raw = RawTrace.from_rows(
        [row(1, 100, 6)], {"asked_V": asked_V, "time_utc": now, "box": "0011223344556677"}
    )
    trace = calibrate(raw, Calibration.from_json(data(zeros=[ZERO.as_json()])))
    assert (trace.number("fixture_ohm"), trace.number("u_fixture_rel")) == (8e11, u_rel)
    assert (trace.text("zero_doubt") is not None) is stale
