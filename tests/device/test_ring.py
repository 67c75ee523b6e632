"""The ring: one count, rows that read back as they were kept, the oldest written over, the rare events' words bounded."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from wire_vectors import ROWS

from dwellbox.codes import DWELL, FAULT_NONE, ST_DWELL
from dwellbox.ring import DONE, FAULT, LOG, SAMPLE, STATE, Ring

_count = st.integers(0, 31)
_short = st.integers(-32768, 32767)
_sum = st.integers(-31 * 32768, 31 * 32767)
_bit = st.integers(0, 1)
_rows = st.tuples(
    st.integers(0, 2**30 - 1), st.integers(0, 11), st.integers(0, 2), _bit, _count, _sum, _short, _short,
    _count, _sum, _short, _short, _count, _short, _short, st.integers(0, 15), _bit,
)  # fmt: skip


def read(ring: Ring, n: int) -> tuple[int, ...]:
    buffer = bytearray(200)
    end = ring.put_row(n, buffer, 7)
    return tuple(int(number) for number in buffer[8:end].split(b","))


@pytest.mark.parametrize("row", ROWS)
def test_row_reads_back(row: tuple[int, ...]) -> None:
    ring = Ring(64)
    ring.sample(*row)
    assert ring.kind(0) == SAMPLE
    assert read(ring, 0) == row


@given(st.lists(_rows, min_size=1, max_size=5))
def test_rows_read_back(rows: list[tuple[int, ...]]) -> None:
    ring = Ring(64)
    for row in rows:
        ring.sample(*row)
    assert [read(ring, n) for n in range(len(rows))] == rows


def test_capacity_is_at_least_what_was_asked_and_the_oldest_goes_first() -> None:
    ring = Ring(100)
    assert ring.capacity >= 100
    for t in range(3 * ring.capacity):
        ring.sample(t, *ROWS[1][1:])
        assert ring.n == t + 1
        assert ring.first == max(0, ring.n - ring.capacity)
    for n in range(ring.first, ring.n):
        assert read(ring, n) == (n, *ROWS[1][1:])


def test_every_kind_keeps_its_words_in_the_one_count() -> None:
    ring = Ring(64)
    ring.sample(*ROWS[0])
    ring.state(1, DWELL, ST_DWELL, "why")
    ring.fault(2, 5, DWELL, 41000)
    ring.done(3, 1, "key", 0, FAULT_NONE, [("look_pf", 1)])
    ring.log(4, "words")
    assert [ring.kind(n) for n in range(ring.n)] == [SAMPLE, STATE, FAULT, DONE, LOG]
    assert [ring.note(n) for n in range(ring.n)] == [
        None,
        (1, (DWELL, ST_DWELL, "why")),
        (2, (5, DWELL, 41000)),
        (3, (1, "key", 0, FAULT_NONE, [("look_pf", 1)])),
        (4, ("words",)),
    ]


def test_words_are_bounded_and_never_those_of_another_event() -> None:
    ring = Ring(512)
    for t in range(700):
        ring.log(t, str(t))
        if t % 3 == 0:
            ring.sample(t, *ROWS[0][1:])
    assert len(ring._notes) <= 120, "a storm of events may not eat the heap"
    for n in range(ring.first, ring.n):
        note = ring.note(n)
        if note is not None:
            assert ring.kind(n) == LOG
            assert note == (int(note[1][0]), note[1])
    newest = [n for n in range(ring.first, ring.n) if ring.kind(n) == LOG][-100:]
    assert all(ring.note(n) is not None for n in newest)
