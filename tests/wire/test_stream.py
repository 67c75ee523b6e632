"""Events in order, each once, none missing, whatever the link did."""

from __future__ import annotations

import random

import pytest

from dwellbench.wire.core import Notice
from dwellbench.wire.stream import Stream


def event(n: int) -> Notice:
    return Notice("log", {"n": n, "boot": 1, "t": 0, "text": str(n)})


@pytest.mark.parametrize("seed", range(200))
def test_any_loss_doubling_and_order_ends_with_each_event_once(seed: int) -> None:
    chance = random.Random(seed)
    count = 60
    stream, got = Stream(0), []
    arriving = [n for n in range(count) if chance.random() > 0.3]
    arriving += [n for n in arriving if chance.random() < 0.3]
    chance.shuffle(arriving)
    for n in arriving:
        got += stream.take(event(n))
    stream.expect(count)
    for _ in range(2 * count):
        gap = stream.missing()
        if gap is None:
            break
        start, size = gap
        got += stream.oldest_is(start)
        for n in range(start, start + size):
            if chance.random() > 0.4:
                got += stream.take(event(n))
    assert [one.n for one in got] == list(range(count))
    assert (stream.missing(), stream.lost) == (None, 0)


def test_what_the_box_no_longer_keeps_is_counted_and_passed() -> None:
    stream = Stream(10)
    assert stream.take(event(15)) == []
    assert stream.missing() == (10, 5)
    assert [one.n for one in stream.oldest_is(13)] == []
    assert stream.lost == 3
    assert [one.n for one in stream.take(event(13)) + stream.take(event(14))] == [13, 14, 15]


def test_a_message_of_several_rows_is_as_many_events() -> None:
    stream = Stream(4)
    rows = [[n, *([0] * 17)] for n in (4, 5, 6)]
    got = stream.take(Notice("samples", {"n": 4, "boot": 1, "rows": rows}))
    assert [one.n for one in got] == [4, 5, 6]
