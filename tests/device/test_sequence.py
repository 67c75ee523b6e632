"""Every (state, event, facts) of the table of legal moves: what leads on, and that everything else fails closed."""

import itertools

import pytest

from dwellbox import codes, sequence
from dwellbox.sequence import EVENTS, MOVES, move

ALL_FACTS = range(64)
POWERED = (codes.CHARGE, codes.DWELL, codes.MEASURE, codes.FORM)


def test_every_state_has_a_row() -> None:
    assert set(MOVES) == set(range(len(codes.STATES)))


@pytest.mark.parametrize(
    ("state", "event"), list(itertools.product(range(len(codes.STATES)), range(len(EVENTS))))
)
def test_every_pair_either_moves_by_its_row_or_fails_closed(state: int, event: int) -> None:
    row = MOVES[state].get(event, ())
    for facts in ALL_FACTS:
        after = move(state, event, facts)
        if after < 0:
            assert all(guard & ~facts for guard, _ in row)
        else:
            assert any(guard & ~facts == 0 and to == after for guard, to in row)


@pytest.mark.parametrize("state", range(len(codes.STATES)))
def test_a_fault_leads_to_lockout_from_everywhere(state: int) -> None:
    assert all(move(state, sequence.EV_FAULT, facts) == codes.LOCKOUT for facts in ALL_FACTS)


def test_rest_is_reached_only_with_discharge_proven() -> None:
    for state, row in MOVES.items():
        for event, ways in row.items():
            for guard, to in ways:
                if to == codes.REST:
                    assert guard & sequence.PROVEN, (codes.STATES[state], EVENTS[event])


def test_the_supply_may_come_on_only_by_an_accepted_run() -> None:
    ways = [
        (state, event, guard)
        for state, row in MOVES.items()
        if state not in POWERED
        for event, alternatives in row.items()
        for guard, to in alternatives
        if to in POWERED
    ]
    needed = sequence.PROVEN | sequence.CLEAR | sequence.CALM | sequence.SHUT
    assert ways == [(codes.REST, sequence.EV_RUN, needed)]


def test_lockout_is_left_only_by_acknowledgement() -> None:
    out = {
        event for event, ways in MOVES[codes.LOCKOUT].items() if any(to != codes.LOCKOUT for _, to in ways)
    }
    assert out == {sequence.EV_ACKNOWLEDGE}
    for facts in ALL_FACTS:
        left = move(codes.LOCKOUT, sequence.EV_ACKNOWLEDGE, facts) == codes.REST
        assert left == all(facts & bit for bit in (sequence.PROVEN, sequence.CALM, sequence.ACCOUNTED))


def test_names_for_people() -> None:
    assert sequence.name_of(codes.DWELL, sequence.EV_PROVEN) == "dwell/proven"
