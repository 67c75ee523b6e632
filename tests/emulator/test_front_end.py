"""Codes, noise, clocks and the calibration that a box carries."""

from __future__ import annotations

import statistics
from dataclasses import fields

import pytest

from dwellbench.emulator import front_end
from dwellbench.emulator.converters import Chips, calibration, lines, thermistor_V
from dwellbench.emulator.dice import Dice, noise_table
from dwellbench.emulator.reference import box

PART_WIDE, PART_FINE, SUPPLY, THERMISTOR, REFERENCE_A = 0, 1, 2, 4, 6
SHUNT_WIDE, SHUNT_FINE, REFERENCE_B = 8, 9, 10
IDEAL = front_end.errors(1, {"ideal": True})


def chips(errors: front_end.Errors = IDEAL) -> Chips:
    return Chips(errors, 23.0, Dice(1, "test"))


def test_an_ideal_box_reads_as_drawn():
    c = chips()
    assert c.first(PART_WIDE, 1001.0, 0.0) == 32000  # 1 V of +/-1.024 V
    assert c.first(PART_FINE, 200.2, 0.0) == 25600  # 0.2 V of +/-0.256 V
    assert c.first(SUPPLY, 0.0, 500.5) == 16000
    assert c.first(REFERENCE_A, 0.0, 0.0) == 6400
    assert c.second(SHUNT_WIDE, 0.512) == 16384
    assert c.second(SHUNT_FINE, -0.128) == -16384
    assert c.second(REFERENCE_B, 0.0) == 6400


def test_codes_round_to_the_nearest_and_clip():
    c = chips()
    step = 1.024 / 32768
    assert [c.second(SHUNT_WIDE, k * step) for k in (-1.6, -0.4, 0.4, 0.6, 2.4)] == [-2, 0, 0, 1, 2]
    assert c.second(SHUNT_WIDE, 5.0) == 32767
    assert c.second(SHUNT_WIDE, -5.0) == -32768


def test_a_channel_that_the_converter_lacks_is_an_error():
    with pytest.raises(KeyError):
        chips().first(SHUNT_WIDE, 0.0, 0.0)
    with pytest.raises(KeyError):
        chips().second(PART_WIDE, 0.0)


def test_the_thermistor_follows_its_curve():
    # B equation: 10 kohm at 25 C is half of the feed; 10 kohm exp(3977 (1/296.15 - 1/298.15)) = 10.943 kohm
    assert thermistor_V(25.0) == pytest.approx(0.5)
    assert thermistor_V(23.0) == pytest.approx(10.943 / 20.943, rel=1e-4)
    assert thermistor_V(60.0) < thermistor_V(59.0) < 0.25


def test_drawn_errors_stay_within_what_is_stated_and_differ():
    b = box()
    drawn = [front_end.errors(seed, None) for seed in range(200)]
    for e in drawn:
        assert abs(e.charge_ohm / b.charge_ohm - 1) <= 0.02
        assert all(abs(r / n - 1) <= 0.02 for r, n in zip(e.bleed_ohm, b.bleed_ohm, strict=True))
        assert all(abs(x) <= b.rate_tolerance for x in e.rate_error)
        assert 28.0 < e.detector_off_V < e.detector_on_V < 32.0
        assert e.operate_ms + e.bounce_ms <= 10.0 and e.bolt_ms <= 50.0
        assert abs(e.supply_error) <= b.supply_tolerance
    for name in ("charge_ohm", "part_divider_error", "gain_error_1", "rate_error", "fixture_ohm"):
        assert len({getattr(e, name) for e in drawn}) == len(drawn)
    assert statistics.pstdev(e.part_divider_error for e in drawn) == pytest.approx(5e-3 / 3, rel=0.2)


def test_the_same_seed_draws_the_same_box():
    assert front_end.errors(7, None) == front_end.errors(7, None)
    assert front_end.errors(7, None) != front_end.errors(8, None)
    assert front_end.errors(7, {"charge_ohm": 401e3}).charge_ohm == 401e3


def test_every_field_may_be_fixed_and_nothing_else():
    names = {f.name for f in fields(front_end.Errors)}
    assert set(front_end.FRONT_END_KEYS) - {"ideal", "calibrated"} == names


def test_noise_has_the_stated_size_and_no_offset():
    c = chips(front_end.errors(1, {"ideal": True, "noise_code": (2.0, 4.0)}))
    codes = []
    for k in range(4000):
        codes.append(c.second(SHUNT_WIDE, 0.1))
        if k % 20 == 0:
            c.stir()
    assert statistics.mean(codes) == pytest.approx(3200.0, abs=0.15)
    assert statistics.pstdev(codes) == pytest.approx(2.0, rel=0.05)


def test_the_noise_table_is_normal_enough():
    table = noise_table()
    assert statistics.fmean(table) == pytest.approx(0.0, abs=1e-12)
    assert statistics.pstdev(table) == pytest.approx(1.0, abs=1e-12)
    assert sum(abs(x) > 2 for x in table) / len(table) == pytest.approx(0.0455, abs=0.006)
    assert table[:2] == pytest.approx([1.143694314764077, 1.2565376142081441], abs=1e-12)  # on every machine


def test_damp_clips_leak():
    assert front_end.values(IDEAL).fixture_ohm == pytest.approx(1e12)
    assert front_end.values(IDEAL, 85.0).fixture_ohm == pytest.approx(1e11)


def test_the_chip_s_own_clock_sets_its_window():
    errors = front_end.errors(1, {"ideal": True, "rate_error": (0.1, -0.1)})
    assert front_end.windows_s(errors) == pytest.approx((1 / 275, 1 / 225))


def test_the_calibration_is_true_within_what_it_says():
    pulls = []
    for seed in range(60):
        errors = front_end.errors(seed, None)
        first, second = lines(errors)
        kept = calibration(errors, seed, "0" * 16, 23.0)
        for row, line in zip(kept["volts"] + kept["supply"], [first[k] for k in range(4)], strict=True):
            pulls.append((row["per_code"] * line.scale - 1) / row["u_rel"])
            pulls.append((row["offset_code"] - line.offset) / row["u_offset_code"])
        for k, row in enumerate(kept["amps"]):
            scale = second[SHUNT_WIDE + k % 2].scale * errors.shunts_ohm[k // 2]
            pulls.append((row["per_code"] * scale - 1) / row["u_rel"])
    assert statistics.fmean(pulls) == pytest.approx(0.0, abs=0.15)
    assert statistics.pstdev(pulls) == pytest.approx(1.0, rel=0.1)
    assert max(abs(p) for p in pulls) < 6.0


def test_the_calibration_has_the_form_that_the_box_keeps():
    kept = calibration(IDEAL, 1, "0123456789abcdef", 23.0)
    assert kept["box"] == "0123456789abcdef" and len(kept["id"]) == 8
    assert [row["range_mv"] for row in kept["volts"]] == [1024, 256]
    assert [(r["shunt_ohm"], r["range_mv"]) for r in kept["amps"]] == [
        (560, 1024), (560, 256), (100000, 1024), (100000, 256), (1000000, 1024), (1000000, 256),
    ]  # fmt: skip
    assert kept["volts"][0]["per_code"] == pytest.approx(0.03128125, rel=6e-3)
