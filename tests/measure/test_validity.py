"""A calibration that is too old, or of another box: what is used instead, and that it is said."""

from __future__ import annotations

import pytest
from tests.measure.test_calibrate import data, row

from dwellbench.measure.calibrate import calibrate
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.raw import RawTrace
from dwellbench.measure.trace import Trace
from dwellbench.measure.validity import age_s, told_age

OWN = "0011223344556677"
DRAWN = Calibration.without()


def traced(box: str | None, now: str | None, **changes: object) -> Trace:
    rows = [row(1, 100, 6, sv=18000, si=2000)]
    return calibrate(
        RawTrace.from_rows(rows, {"box": box, "time_utc": now}), Calibration.from_json(data(**changes))
    )


@pytest.mark.parametrize(
    ("box", "now", "changes"),
    [
        (OWN, "2027-01-05T09:00:00Z", {}),
        (OWN, None, {}),
        (None, "2026-06-01T00:00:00Z", {}),
        (OWN, "2036-01-01T00:00:00Z", {"valid_days": None}),
        (OWN, "2036-01-01T00:00:00Z", {"made_utc": None}),
    ],
)
def test_a_calibration_in_force_is_used_as_it_is(
    box: str | None, now: str | None, changes: dict[str, object]
) -> None:
    trace = traced(box, now, **changes)
    assert trace.text("calibration_doubt") is None
    assert trace.number("u_gain_v") == 0.001


def test_an_expired_one_keeps_its_scales_and_takes_the_drawing_s_doubt() -> None:
    fresh, old = traced(OWN, "2026-06-01T00:00:00Z"), traced(OWN, "2027-01-15T10:00:00Z")
    assert old.v_part_V == pytest.approx(fresh.v_part_V)
    assert old.i_shunt_A == pytest.approx(fresh.i_shunt_A)
    assert old.number("u_gain_v") == max(0.001, DRAWN.volts[0].u_rel)
    assert "expired 10 days ago" in (old.text("calibration_doubt") or "")
    assert old.text("calibration") == "0a1b2c3d"


def test_one_from_another_box_is_not_used() -> None:
    other = traced("ffffffffffffffff", "2026-06-01T00:00:00Z")
    nominal = calibrate(RawTrace.from_rows([row(1, 100, 6, sv=18000, si=2000)], {}), DRAWN)
    assert other.v_part_V == pytest.approx(nominal.v_part_V)
    assert other.text("calibration") == "nominal"
    assert OWN in (other.text("calibration_doubt") or "")


def test_one_that_is_dated_in_the_future_is_doubted() -> None:
    assert "clocks" in (traced(OWN, "2025-12-31T00:00:00Z").text("calibration_doubt") or "")


def test_ages_are_counted_between_times_however_they_are_written() -> None:
    assert age_s("2026-01-01T00:00:00Z", "2026-01-02T01:00:00+01:00") == 86400.0
    assert age_s("2026-01-01", "2026-01-01T00:01:00") == 60.0
    assert age_s("yesterday", "2026-01-01T00:00:00Z") is None
    assert [told_age(age) for age in (5.0, 600.0, 7200.0, 864000.0)] == ["5 s", "10 min", "2 h", "10 days"]
