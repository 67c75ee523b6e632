"""The world driven by hand, as a board would: what it shows, who it hurts, and that it is the same every
time."""

from __future__ import annotations

import json

import pytest

from dwellbench.emulator.reference import bits
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.world import CAUSE_RESET, NO_CODE, NO_CONVERSION, World

IN, OUT = bits("inputs"), bits("outputs")
PART, SUPPLY, SHUNT = 0, 2, 8
CHARGE = OUT["charge"] | OUT["bleed_open"]
FILM = """
[[part]]
label = "F"
capacitance_F = 47e-9
leakage_ohm = 1e12
absorption = [[1.0, 0.001], [10.0, 0.001]]
[[part]]
label = "G"
capacitance_F = 1e-6
"""


class Hand:
    """A controller that does what it is told: outputs, setting, pumping, feeding."""

    def __init__(self, text: str = FILM, seed: int = 5) -> None:
        self.world = World(Scenario.parse(text), seed)
        self.outputs, self.mv, self.pump = 0, 0, 0

    def go(self, seconds: float, conv0: int = PART, conv1: int = SHUNT) -> Hand:
        for _ in range(round(seconds / 0.005)):
            self.world.period(self.outputs, self.mv, self.pump, 1, conv0, conv1)
        return self

    def set(self, outputs: int, mv: int | None = None) -> Hand:
        self.outputs = outputs
        if mv is not None:
            self.mv, self.pump = mv, int(mv > 0)
        return self

    def charge(self, mv: int = 400_000, seconds: float = 1.0) -> Hand:
        return self.set(CHARGE, mv).go(seconds)

    def has(self, name: str) -> bool:
        return bool(self.world.inputs & IN[name])


def test_at_power_up_part_one_is_fitted_lid_shut_and_nothing_energised():
    hand = Hand().go(0.1)
    truth = hand.world.truth
    assert (truth.part_index, truth.part_label, truth.lid_open, truth.bolt_closed) == (0, "F", False, True)
    assert hand.has("lid_a") and not hand.has("lid_b") and hand.has("locked")
    assert not hand.has("hv") and not hand.has("stop")
    assert abs(truth.part_V) < 1e-3 and truth.bleeding


def test_charge_is_seen_by_divider_detector_and_shunt():
    hand = Hand().charge()
    assert hand.has("hv")
    assert hand.world.codes[0] * 1.024 / 32768 * 1001 == pytest.approx(hand.world.truth.node_V, rel=0.02)
    assert hand.world.truth.part_V == pytest.approx(400.0 * 100.1 / 100.5, rel=0.02)
    hand.go(0.005, conv0=SUPPLY)
    assert hand.world.codes[0] * 1.024 / 32768 * 1001 == pytest.approx(400.0, rel=0.02)


def test_no_conversion_no_code():
    hand = Hand().go(0.1, NO_CONVERSION, NO_CONVERSION)
    assert hand.world.codes == [NO_CODE, NO_CODE]


def test_not_pumped_for_fifty_ms_the_supply_is_off():
    hand = Hand().charge()
    hand.pump = 0
    hand.go(0.045)
    assert hand.world.truth.supply_on
    hand.go(0.01)
    assert not hand.world.truth.supply_on


def test_the_supply_slews_at_ten_volts_a_ms_and_a_staircase_is_a_ramp():
    hand = Hand().set(CHARGE).go(0.1)
    hand.set(CHARGE, 600_000).go(0.03)
    assert hand.world.truth.supply_V == pytest.approx(300.0, rel=1e-6)
    hand.go(0.1)
    assert hand.world.truth.supply_V == pytest.approx(600.0, rel=0.01)
    steady = Hand(FILM + "[front_end]\nideal = true\n").set(CHARGE).go(0.1)
    codes = set()
    for k in range(1, 201):
        steady.set(CHARGE, 500 * k).go(0.005)
        codes.add(steady.world.codes[1]) if k > 100 else None
    # 100 V/s into 47 nF and its quick absorption is 4.7 uA: 2.6 mV on 560 ohm, 84 codes, and no tooth of the
    # staircase
    assert len(codes) <= 2 and min(codes) == pytest.approx(84, abs=1)


def test_lifting_the_lid_drops_supply_and_charge_relay_in_the_wiring():
    hand = Hand(FILM + "[[fault]]\nkind = 'lid_open'\nat_s = 1.5\nfor_s = 2.0\n")
    hand.set(CHARGE, 400_000).go(1.49)  # the run is seen when the supply is first pumped, after 0 s
    assert hand.world.truth.supply_on and not hand.world.truth.lid_open
    hand.go(0.06)
    truth = hand.world.truth
    assert (
        truth.lid_open and not truth.supply_on and truth.bleeding
    )  # charge relay fallen to the second bleed
    assert not hand.has("lid_a") and hand.has("lid_b")
    hand.go(2.0)
    assert not hand.world.truth.lid_open and hand.has("lid_a")
    assert not hand.world.truth.hurt  # 47 nF were empty before a hand could be there


def test_a_large_part_is_still_charged_when_a_hand_is_there():
    text = "[[part]]\ncapacitance_F = 47e-6\n[[fault]]\nkind = 'lid_open'\nat_s = 60.0\n"
    hand = Hand(text).charge(seconds=59.0)
    assert not hand.world.truth.hurt
    hand.go(2.0)
    (harm,) = hand.world.truth.harms
    # both bleeds, 11 kohm: 0.52 s; a tenth of a second after the lid most of the voltage is still there
    assert harm.why == "the lid was forced" and 0.75 * 390 < harm.volts < 0.95 * 390
    assert harm.stored_J == pytest.approx(0.5 * 47e-6 * harm.volts**2, rel=0.01)


def test_the_lock_opens_only_with_power_and_the_detector_low():
    hand = Hand().charge()
    hand.set(CHARGE | OUT["release"]).go(0.2)
    assert hand.has("locked")
    hand.set(OUT["release"], 0).go(0.2)
    assert not hand.has("locked") and not hand.has("hv")
    hand.set(0).go(0.2)
    assert hand.has("locked")


def test_after_a_run_the_operator_changes_the_part():
    hand = Hand("[operator]\nhandling_s = 4.0\n" + FILM)
    hand.set(OUT["release"]).go(3.0)
    assert not hand.world.truth.lid_open  # no run has been
    hand.charge().set(0, 0).go(0.5).set(OUT["release"]).go(1.0)
    assert not hand.world.truth.lid_open
    hand.go(0.2)
    assert hand.world.truth.lid_open and hand.world.truth.part_label == "F"
    hand.go(1.0)
    assert hand.world.truth.part_index == -1
    hand.go(2.0)
    assert hand.world.truth.part_label == "G" and hand.world.truth.lid_open
    hand.go(1.0)
    assert not hand.world.truth.lid_open and not hand.world.truth.hurt
    hand.charge().set(0, 0).go(0.5).set(OUT["release"]).go(6.5)
    assert hand.world.truth.part_label == "G" and not hand.world.truth.lid_open  # the last stays


def test_a_part_that_comes_charged_shows_at_once_and_hurts_nobody_by_itself():
    hand = Hand("[[part]]\ncapacitance_F = 22e-6\ninitial_V = 300.0\n")
    hand.go(0.005)
    assert hand.has("hv") and hand.world.truth.part_V > 290.0
    hand.go(3.0)
    assert not hand.has("hv") and hand.world.truth.part_V < 1.0
    assert not hand.world.truth.hurt


def test_a_lead_that_lets_go_hides_the_charge_and_an_opened_lid_then_hurts():
    text = FILM + "[operator]\nhandling_s=2.0\n[[fault]]\nkind = 'part_opens'\nat_s = 1.0\n"
    hand = Hand(text).charge(seconds=2.0)
    hand.set(OUT["release"], 0).go(3.0)
    assert not hand.has("hv")
    (harm,) = hand.world.truth.harms
    assert harm.volts == pytest.approx(398.0, rel=0.02) and harm.why == "the lid was opened"


def test_no_food_for_two_seconds_resets_once():
    hand = Hand().go(0.1)
    causes = []
    for _ in range(500):
        hand.world.period(0, 0, 0, 0, -1, -1)
        causes.append(hand.world.take_reset())
    assert causes.count(CAUSE_RESET) == 1 and causes.index(CAUSE_RESET) == pytest.approx(400, abs=2)


def test_the_clock_counts_wraps_and_jumps():
    world = Hand(f"clock_ms = {2**30 - 100}\n").go(0.2).world
    assert world.clock_ms() == 100
    world = Hand("[[fault]]\nkind = 'clock_wrap'\nat_s = 0.5\n").go(0.45).world
    assert world.clock_ms() == 2**30 - 50
    world = Hand("[[fault]]\nkind = 'clock_jump'\nby_ms = 5000\nat_s = 0.1\nrun = 0\n").go(0.2).world
    assert world.clock_ms() == 5200


def codes_of(hand: Hand, periods: int) -> list[tuple[int, int, int]]:
    out = []
    for k in range(periods):
        hand.go(0.005, conv0=(PART, SUPPLY, 4, 6)[k % 4], conv1=(SHUNT, 9)[k % 2])
        out.append((*hand.world.codes, hand.world.inputs))
    return out


def test_same_seed_same_codes_and_another_seed_others():
    a, b, c = (codes_of(Hand(seed=s).charge(), 400) for s in (5, 5, 6))
    assert a == b and a != c


@pytest.mark.parametrize("at", [0.0, 0.01, 0.5, 1.02])
def test_a_snapshot_through_json_goes_on_with_the_same_codes(at):
    text = (
        FILM
        + "[[fault]]\nkind = 'part_leaks'\nat_s = 0.6\n"
        + "[[fault]]\nkind = 'stop_pressed'\nat_s = 0.2\nfor_s = 1.0\n"
    )
    hand = Hand(text).set(CHARGE, 300_000).go(at)
    kept = json.loads(json.dumps(hand.world.snapshot()))
    twin = Hand(text)
    twin.world.restore(kept)
    twin.outputs, twin.mv, twin.pump = hand.outputs, hand.mv, hand.pump
    assert codes_of(hand, 300) == codes_of(twin, 300)
    for one in (hand, twin):
        one.set(OUT["release"], 0)
    assert codes_of(hand, 600) == codes_of(twin, 600)
    assert hand.world.truth == twin.world.truth
    assert json.dumps(hand.world.snapshot()) == json.dumps(twin.world.snapshot())


def test_a_snapshot_of_another_seed_is_refused():
    with pytest.raises(ValueError, match="seed"):
        Hand(seed=1).world.restore(Hand(seed=2).world.snapshot())


def test_an_uncalibrated_box_has_no_calibration():
    assert Hand("[front_end]\ncalibrated = false\n").world.calibration is None
    kept = Hand().world.calibration
    assert kept is not None and kept["box"] == Hand().world.unique_id and len(kept["box"]) == 16
