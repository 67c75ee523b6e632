"""The interlock table: every row fires in its states after its periods, and with any one of its conditions missing it does not."""

import pytest

from dwellbox import codes, interlock
from dwellbox.interlock import TABLE, Interlock

STATES = range(len(codes.STATES))


def first_fault(bits: int, state: int, periods: int) -> tuple[int, int] | None:
    """Return (period, fault) of the first fault within so many periods."""
    guard = Interlock()
    for period in range(1, periods + 1):
        fault = guard.step(bits, state)
        if fault:
            return period, fault
    return None


@pytest.mark.parametrize("row", TABLE, ids=lambda row: codes.FAULTS[row[0]])
@pytest.mark.parametrize("state", STATES, ids=lambda state: codes.STATES[state])
def test_a_row_fires_in_its_states_and_only_there(row: tuple[int, ...], state: int) -> None:
    fault, present, _absent, states, periods = row
    found = first_fault(present, state, periods)
    alone = Interlock((row,))
    fires = [alone.step(present, state) for _ in range(periods)]
    if states >> state & 1:
        assert fires == [0] * (periods - 1) + [fault]
        assert found is not None
    else:
        assert fires == [0] * periods


@pytest.mark.parametrize("row", TABLE, ids=lambda row: codes.FAULTS[row[0]])
def test_a_row_does_not_fire_without_one_of_its_conditions_or_with_what_must_be_absent(
    row: tuple[int, ...],
) -> None:
    _fault, present, absent, states, periods = row
    state = next(s for s in STATES if states >> s & 1)
    bit = 1
    while bit <= present:
        if present & bit:
            alone = Interlock((row,))
            assert not any(alone.step(present & ~bit, state) for _ in range(periods + 2))
        bit <<= 1
    if absent:
        alone = Interlock((row,))
        assert not any(alone.step(present | absent, state) for _ in range(periods + 2))


@pytest.mark.parametrize("row", TABLE, ids=lambda row: codes.FAULTS[row[0]])
def test_an_interruption_begins_the_count_anew(row: tuple[int, ...]) -> None:
    fault, present, _absent, states, periods = row
    state = next(s for s in STATES if states >> s & 1)
    alone = Interlock((row,))
    for _ in range(periods - 1):
        assert alone.step(present, state) == 0
    assert alone.step(0, state) == 0
    answers = [alone.step(present, state) for _ in range(periods)]
    assert answers == [0] * (periods - 1) + [fault]


@pytest.mark.parametrize("condition", [interlock.LID_OPEN, interlock.LID_UNSURE, interlock.STOP])
@pytest.mark.parametrize("state", [codes.CHARGE, codes.DWELL, codes.MEASURE, codes.DISCHARGE, codes.FORM])
def test_what_guards_a_person_acts_in_the_period_it_is_seen(condition: int, state: int) -> None:
    found = first_fault(condition, state, 1)
    assert found is not None


def test_no_condition_no_fault() -> None:
    assert all(first_fault(interlock.PART_LOW, state, 300) is None for state in STATES)


def test_calm_looks_at_every_row_but_lid_and_bolt() -> None:
    guard = Interlock()
    assert guard.calm(interlock.PART_LOW)
    assert guard.calm(interlock.PART_LOW | interlock.LID_OPEN | interlock.UNLOCKED)
    for bit in (
        interlock.STOP,
        interlock.SILENT,
        interlock.STUCK,
        interlock.SUPPLY_ON,
        interlock.WARM,
        interlock.LID_UNSURE,
    ):
        assert not guard.calm(interlock.PART_LOW | bit)
