"""Relays take their time, bounce, and are done within what the reference box states."""

from __future__ import annotations

import pytest

from dwellbench.emulator import front_end
from dwellbench.emulator.dice import Dice
from dwellbench.emulator.reference import box
from dwellbench.emulator.relays import CHARGE, LOW, REST, TRAVEL, WORK, Relays


def relays(seed: int = 1) -> Relays:
    return Relays(front_end.errors(seed, None), Dice(seed, "relays"))


def course(r: Relays, which: int, on: bool, now_us: int) -> list[tuple[int, int]]:
    """(microseconds after the coil, position) of every move."""
    r.drive(which, on, now_us)
    moves = []
    while r.due:
        event = r.due.pop(0)
        if r.move(event):
            moves.append((event.at_us - now_us, r.position[which]))
    return moves


@pytest.mark.parametrize("seed", range(40))
def test_a_changeover_leaves_before_it_touches_and_is_done_within_its_time(seed):
    r = relays(seed)
    for turn in range(10):
        on = turn % 2 == 0
        moves = course(r, CHARGE, on, turn * 100_000)
        goal = WORK if on else REST
        assert moves[0][1] == TRAVEL and moves[0][0] > 0
        assert moves[-1][1] == goal
        assert moves[-1][0] <= box().relay_s * 1e6
        assert {position for _, position in moves} <= {TRAVEL, goal}  # never both sides
        assert [at for at, _ in moves] == sorted(at for at, _ in moves)


def test_some_bounce_and_some_do_not():
    counts = [len(course(relays(seed), CHARGE, True, 0)) for seed in range(60)]
    assert min(counts) == 2 and max(counts) > 4


def test_the_same_coil_again_does_nothing_and_a_change_of_mind_is_followed():
    r = relays()
    r.drive(LOW, True, 0)
    due = list(r.due)
    r.drive(LOW, True, 1000)
    assert r.due == due
    r.drive(LOW, False, 2000)
    while r.due:
        r.move(r.due.pop(0))
    assert r.position[LOW] == REST


def test_welded_stays_where_it_welds_and_stuck_where_it_is():
    r = relays()
    r.welded[CHARGE] = WORK
    course(r, CHARGE, True, 0)
    assert r.position[CHARGE] == WORK
    assert course(r, CHARGE, False, 100_000) == [] and r.position[CHARGE] == WORK
    r.welded.clear()
    r.settle(CHARGE)
    assert r.position[CHARGE] == REST
    r.stuck.add(LOW)
    assert course(r, LOW, True, 200_000) == [] and r.position[LOW] == REST
