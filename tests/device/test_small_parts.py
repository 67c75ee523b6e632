"""Supply, shunts, ratings, plan, thermistor and latch: each alone, with numbers worked out by hand."""

import json
from pathlib import Path

import pytest

from dwellbox import codes, supply
from dwellbox.latch import Latch
from dwellbox.plan import Plan, refusal
from dwellbox.ratings import Ratings, check_settings
from dwellbox.shunts import LEVELS, Shunts
from dwellbox.supply import Supply
from dwellbox.thermistor import code_at, code_of, temperature_mc

REFERENCE = json.loads((Path(__file__).parents[2] / "device" / "reference_box.json").read_text())
RATINGS = Ratings(REFERENCE, None)


class Pins:
    """Records what the supply is told."""

    def __init__(self) -> None:
        self.mv = -1
        self.pumps = 0

    def supply_mv(self, mv: int) -> None:
        self.mv = mv

    def pump(self) -> None:
        self.pumps += 1


# ---- supply


def test_the_enable_is_pumped_only_while_wanted() -> None:
    pins = Pins()
    it = Supply(pins, RATINGS)
    it.step(0)
    assert pins.pumps == 0
    it.set(100000, 5)
    it.step(5)
    it.off(10)
    it.step(10)
    assert (pins.pumps, pins.mv) == (1, 0)


def test_a_ramp_rises_a_hundred_volts_a_second_and_ends_at_its_goal() -> None:
    pins = Pins()
    it = Supply(pins, RATINGS)
    it.set(0, 1000)
    it.ramp(250000, 100000, 1000)
    it.step(2000)
    assert pins.mv == 100000
    it.step(4000)
    assert (pins.mv, it.ramping) == (250000, False)


@pytest.mark.parametrize(
    ("reading_mv", "verdicts"),
    [
        (250000, [supply.OK, supply.OK]),
        (262000, [supply.OVER, supply.OVER]),
        (238000, [supply.OK, supply.LOST]),
    ],
)
def test_a_reading_is_judged_against_the_setting(reading_mv: int, verdicts: list[int]) -> None:
    it = Supply(Pins(), RATINGS)
    it.set(250000, 0)
    assert it.judge(reading_mv, 50) == supply.OK  # too early to say
    assert [it.judge(reading_mv, 300 + 100 * k) for k in range(2)] == verdicts


def test_a_supply_that_stays_up_after_it_was_switched_off_is_found_even_days_later() -> None:
    it = Supply(Pins(), RATINGS)
    it.set(250000, 0)
    it.off(1000)
    assert it.judge(40000, 1500) == supply.OK
    assert it.judge(40000, 2600) == supply.STILL_ON
    assert it.judge(40000, 2600 + (1 << 29)) == supply.STILL_ON


# ---- shunts


@pytest.mark.parametrize(
    ("current_na", "nf", "level"),
    [
        (1_000_000, 100, (0, 0)),
        (200_000, 100, (0, 1)),
        (5_000, 100, (1, 0)),
        (1_000, 100, (1, 1)),
        (300, 100, (2, 0)),
        (100, 100, (2, 1)),
        (1, 2_000, (1, 1)),  # above 1 uF never 1 Mohm
        (1, 47_000, (0, 1)),  # above 10 uF the charge path rules
    ],
)
def test_the_most_sensitive_shunt_with_room_that_settles(
    current_na: int, nf: int, level: tuple[int, int]
) -> None:
    assert LEVELS[Shunts(RATINGS).finest(current_na, nf)] == level


def test_blanking_after_a_step_to_one_megohm_is_seven_time_constants_of_the_whole_loop() -> None:
    # 7 x (1 Mohm + 400 kohm) x 0.47 uF = 4.6 s, and one window
    assert Shunts(RATINGS).blank_ms(1, 5, 470) == pytest.approx(4606 + 100, abs=2)


# ---- ratings and plan


def test_the_proof_time_covers_the_largest_energy_and_capacitance() -> None:
    """22 kohm x C x ln(V / 30 V), largest over all parts within 50 J, 650 V and 500 uF."""
    import math

    worst = 0.0
    for nf in range(1000, RATINGS.capacitance_nf + 1, 1000):
        volts = min(650.0, math.sqrt(2 * RATINGS.energy_mj / 1000 / (nf * 1e-9)))
        worst = max(worst, RATINGS.bleed_ohm * nf * 1e-9 * math.log(volts / 30))
    assert worst * 1000 <= RATINGS.proof_bleed_ms <= worst * 1000 * 1.05


@pytest.mark.parametrize(
    ("settings", "says"),
    [
        ({}, None),
        ({"volts_mv": 400000}, None),
        ({"volts_mv": 650001}, "volts_mv"),
        ({"volts_mv": 0}, "volts_mv"),
        ({"volts_mv": "400"}, "volts_mv"),
        ({"volts_mv": True}, "volts_mv"),
        ({"charge_ohm": 100}, "charge_ohm"),
        ([], "object"),
    ],
)
def test_settings_may_be_stricter_never_looser(settings: object, says: str | None) -> None:
    problem = check_settings(REFERENCE, settings)
    assert (problem is None) if says is None else (says in problem)


def test_a_stricter_box_refuses_what_the_reference_would_run() -> None:
    plan = Plan({"run_key": "a", "volts_mv": 500000, "dwell_ms": 1000})
    assert refusal(plan, RATINGS) is None
    strict = Ratings(REFERENCE, {"volts_mv": 400000})
    assert refusal(plan, strict)[0] == codes.E_BEYOND_RATING


@pytest.mark.parametrize(
    ("pf", "volts_mv", "fits"), [(470_000_000, 450000, True), (470_000_000, 470000, False)]
)
def test_energy_above_the_rating_is_refused(pf: int, volts_mv: int, fits: bool) -> None:
    plan = Plan({"run_key": "a", "volts_mv": volts_mv, "dwell_ms": 1000, "expect_pf": pf})
    assert (refusal(plan, RATINGS) is None) is fits


# ---- thermistor


@pytest.mark.parametrize(("ohm", "celsius"), [(32554, 0), (12488, 20), (10000, 25), (2490, 60), (1070, 85)])
def test_temperature_from_the_published_table(ohm: int, celsius: int) -> None:
    """Points of a 10 kohm, B 3977 K part's published table (from memory; see standards of the house)."""
    assert temperature_mc(code_of(ohm)) == pytest.approx(celsius * 1000, abs=100)
    assert code_at(celsius * 1000) == pytest.approx(code_of(ohm), abs=2)


# ---- latch


class Flash:
    """Flash and scratch of a board."""

    def __init__(self) -> None:
        self.files: dict[str, bytes] = {}
        self.number = 0

    def keep(self, name: str, data: bytes) -> None:
        self.files[name] = data

    def kept(self, name: str) -> bytes | None:
        return self.files.get(name)

    def scratch(self) -> int:
        return self.number

    def set_scratch(self, value: int) -> None:
        self.number = value


def test_a_reason_survives_a_reset_before_it_is_in_flash_and_a_power_cut_after() -> None:
    board = Flash()
    Latch(board).take(codes.FAULT_LID_OPEN)
    again = Latch(board)
    assert again.reason == codes.FAULT_LID_OPEN
    assert "latch" not in board.files
    again.settle()
    board.number = 0
    assert Latch(board).reason == codes.FAULT_LID_OPEN


def test_the_first_reason_stays_and_missing_charge_is_kept_beside_it() -> None:
    board = Flash()
    latch = Latch(board)
    latch.take(codes.FAULT_STOP)
    latch.take(codes.FAULT_DIVIDER)
    latch.charge_missing()
    again = Latch(board)
    assert (again.reason, again.missing) == (codes.FAULT_STOP, True)


def test_a_reset_during_a_run_is_a_reason_of_its_own() -> None:
    board = Flash()
    Latch(board).mark()
    assert Latch(board).reason == codes.FAULT_RESET_IN_RUN


def test_acknowledging_clears_everywhere() -> None:
    board = Flash()
    latch = Latch(board)
    latch.mark()
    latch.take(codes.FAULT_STOP)
    latch.settle()
    latch.acknowledge()
    assert Latch(board).reason == codes.FAULT_NONE
