"""The decision rule's own behaviour."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dwellbench.errors import UsageError
from dwellbench.limits.decide import Thresholds, conformity

NUMBERS = st.floats(-1e6, 1e6)
DOUBTS = st.floats(1e-6, 1e6)


@given(NUMBERS, DOUBTS, NUMBERS)
def test_two_sides_of_one_limit_add_to_one(y: float, u: float, limit: float) -> None:
    assert conformity(y, u, lower=limit) + conformity(y, u, upper=limit) == pytest.approx(1.0)


@given(NUMBERS, DOUBTS, NUMBERS, NUMBERS)
def test_a_probability_is_one(y: float, u: float, one: float, other: float) -> None:
    assert 0.0 <= conformity(y, u, min(one, other), max(one, other)) <= 1.0


@given(NUMBERS, DOUBTS, NUMBERS, st.floats(0.0, 1e3))
def test_further_inside_is_never_less_probable(y: float, u: float, limit: float, step: float) -> None:
    assert conformity(y - step, u, upper=limit) >= conformity(y, u, upper=limit)


def test_without_doubt_it_is_yes_or_no() -> None:
    assert conformity(1.0, 0.0, upper=1.0) == 1.0
    assert conformity(1.1, 0.0, upper=1.0) == 0.0


def test_a_limit_has_a_side_and_a_doubt_a_sign() -> None:
    with pytest.raises(ValueError, match="side"):
        conformity(1.0, 1.0)
    with pytest.raises(ValueError, match="negative"):
        conformity(1.0, -1.0, upper=2.0)


def test_verdicts_at_the_thresholds() -> None:
    rule = Thresholds(0.9, 0.1)
    assert [rule.verdict(p) for p in (0.9, 0.899, 0.101, 0.1)] == ["fit", "undecided", "undecided", "unfit"]


@pytest.mark.parametrize(("accept", "reject"), [(0.05, 0.95), (1.0, 0.05), (0.95, 0.0), (0.5, 0.5)])
def test_thresholds_that_leave_no_room(accept: float, reject: float) -> None:
    with pytest.raises(UsageError, match="cannot be used"):
        Thresholds(accept, reject)
