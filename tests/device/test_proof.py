"""The proof of discharge, one link of its chain taken away at a time."""

from types import SimpleNamespace

import pytest

from dwellbox.proof import BLEED, OPEN, Proof

RATINGS = SimpleNamespace(still_ms=1000, rebound_ms=500, proof_bleed_ms=30000)


def prove(
    proof: Proof, until_ms: int, *, start: int = 0, below=lambda t: True, supply=lambda t: True
) -> int | None:
    """Step every 5 ms; return when it was proven."""
    proof.begin(start)
    for t in range(0, until_ms, 5):
        now = (start + t) & 0x3FFFFFFF
        proof.step(now, below(t), supply(t))
        if proof.proven:
            return t
    return None


def vouched() -> Proof:
    proof = Proof(RATINGS)
    proof.followed = True
    return proof


def test_a_divider_that_followed_the_charge_vouches_after_one_and_a_half_seconds() -> None:
    when = prove(vouched(), 5000)
    assert when is not None
    assert 1500 <= when <= 1550


def test_a_part_that_never_took_charge_vouches_too() -> None:
    proof = Proof(RATINGS)
    proof.never_charged = True
    assert prove(proof, 5000) is not None


def test_without_a_voucher_only_the_worst_case_bleed_time_proves() -> None:
    when = prove(Proof(RATINGS), 40000)
    assert when is not None
    assert 30500 <= when <= 30550


@pytest.mark.parametrize("start", [0, 0x3FFFFFFF - 700, 0x3FFFFFFF - 1200])
def test_the_clock_may_wrap_meanwhile(start: int) -> None:
    when = prove(vouched(), 5000, start=start)
    assert when is not None
    assert 1500 <= when <= 1550


def test_a_voltage_that_is_not_below_never_proves() -> None:
    assert prove(vouched(), 60000, below=lambda t: False) is None


def test_a_single_reading_above_safe_begins_the_still_time_anew() -> None:
    when = prove(vouched(), 5000, below=lambda t: t != 900)
    assert when is not None
    assert when >= 900 + 1500


def test_a_rebound_while_the_bleed_is_open_closes_it_and_is_remembered() -> None:
    proof = vouched()
    when = prove(proof, 1400, below=lambda t: t != 1200)
    assert when is None
    assert proof.risen


def test_a_supply_that_is_not_seen_off_keeps_the_bleed_on() -> None:
    proof = vouched()
    proof.begin(0)
    asked = {proof.step(t, True, False) for t in range(0, 40000, 5)}
    assert asked == {BLEED}
    assert not proof.proven


def test_a_supply_that_comes_up_during_the_rebound_closes_the_bleed_at_once() -> None:
    proof = vouched()
    proof.begin(0)
    answers = [proof.step(t, True, t < 1200) for t in range(0, 1300, 5)]
    assert OPEN in answers
    assert answers[1200 // 5] == BLEED
    assert not proof.proven


def test_a_new_run_forgets_what_the_last_one_witnessed() -> None:
    proof = vouched()
    prove(proof, 5000)
    proof.forget()
    assert not proof.proven
    assert not proof.followed
