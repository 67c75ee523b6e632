"""What is asked for when events are missing, and when it is given up."""

from __future__ import annotations

from dwellbench.wire.core import Answer, Notice, Refusal
from dwellbench.wire.inbox import AGAIN_S, FETCHES, Inbox


def event(n: int) -> Notice:
    return Notice("log", {"n": n, "boot": 1, "t": 0, "text": str(n)})


def answer(id_: int, first: int) -> Answer:
    return Answer(id_, "samples", {"from": first, "count": 1, "next": first + 1})


def gapped() -> Inbox:
    inbox = Inbox()
    inbox.begin_at(5)
    inbox.take(event(7))
    return inbox


def taken(inbox: Inbox) -> list[int]:
    return [notice.n for notice in inbox.ready]


def test_a_gap_is_asked_for_once_until_it_is_time_again() -> None:
    inbox = gapped()
    page = inbox.due(0.0)
    assert page == (5, 2)
    inbox.asked(1, page, 0.0)
    assert inbox.due(AGAIN_S / 2) is None
    assert inbox.due(AGAIN_S) == (5, 2)


def test_the_answer_gives_the_events_their_time() -> None:
    inbox = gapped()
    inbox.asked(1, inbox.due(0.0) or (0, 0), 0.0)
    assert not inbox.answer(answer(2, 5), 0.9)
    assert inbox.answer(answer(1, 5), 0.9)
    assert inbox.due(AGAIN_S) is None
    inbox.take(event(5))
    inbox.take(event(6))
    assert taken(inbox) == [5, 6, 7]
    assert (inbox.due(9.0), inbox.lost) == (None, 0)


def test_what_is_expected_and_does_not_come_is_asked_for() -> None:
    inbox = Inbox()
    inbox.begin_at(3)
    assert inbox.due(0.0) is None
    inbox.expect(6)
    assert inbox.due(0.0) == (3, 3)


def test_an_event_that_never_comes_whole_is_lost_alone() -> None:
    inbox = gapped()
    inbox.take(event(6))
    now_s = 0.0
    for id_ in range(FETCHES):
        page = inbox.due(now_s)
        assert page == (5, 1)
        inbox.asked(id_, page, now_s)
        inbox.answer(answer(id_, 5), now_s)
        now_s += AGAIN_S
    assert inbox.due(now_s) is None
    assert (taken(inbox), inbox.lost) == ([6, 7], 1)


def test_silence_gives_nothing_up() -> None:
    """A link that carries nothing for a minute is no reason to lose what the box still keeps."""
    inbox = gapped()
    for id_ in range(60):
        page = inbox.due(id_ * AGAIN_S)
        assert page == (5, 2)
        inbox.asked(id_, page, id_ * AGAIN_S)
        if id_ % 2:
            inbox.answer(Refusal(id_, -32603, "Internal error", None), id_ * AGAIN_S)
            inbox.cut()
    assert inbox.lost == 0


def test_what_the_box_no_longer_keeps_is_counted() -> None:
    inbox = gapped()
    inbox.asked(1, inbox.due(0.0) or (0, 0), 0.0)
    inbox.answer(answer(1, 6), 0.0)
    assert inbox.lost == 1
    inbox.take(event(6))
    assert taken(inbox) == [6, 7]


def test_a_long_gap_is_fetched_page_after_page_without_a_pause() -> None:
    inbox = Inbox()
    inbox.expect(150)
    asked, now_s = [], 0.0
    for n in range(150):
        page = inbox.due(now_s)
        if page is not None:
            asked.append(page)
            inbox.asked(n, page, now_s)
        now_s += AGAIN_S / 2  # slowly, but they come: no reason to ask for them again
        inbox.take(event(n))
    assert asked == [(0, 64), (64, 64), (128, 22)]
    assert taken(inbox) == list(range(150))
