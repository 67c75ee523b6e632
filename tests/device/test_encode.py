"""Lines going out: the same text whatever room the link has, the checksum right, the heap's texts strict JSON."""

from __future__ import annotations

import json
import zlib
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from wire_vectors import ENCODE, ROWS

from dwellbox.codes import DWELL, END_SHORT, FAULT_LID_OPEN, FAULT_NONE, ST_DWELL
from dwellbox.encode import LINE, Line, text
from dwellbox.ring import Ring


class Sink:
    """A link with a given room a period."""

    def __init__(self, rooms: list[int]) -> None:
        self.rooms = rooms
        self.left = 0
        self.data = bytearray()
        self.period = 0

    def next_period(self) -> None:
        self.left = self.rooms[self.period % len(self.rooms)]
        self.period += 1

    def room(self) -> int:
        return self.left

    def put(self, byte: int) -> None:
        assert self.left > 0, "put without room"
        self.left -= 1
        self.data.append(byte)


def sent(line: Line, rooms: list[int], most: int = 32, numbers: int = 6) -> bytes:
    """Fill and send a line as the wire does; every period is bounded."""
    sink = Sink(rooms)
    while line.busy:
        sink.next_period()
        before = len(sink.data)
        if line.fill(numbers):
            count = line.send(sink, most)
            assert count == len(sink.data) - before <= most
        assert sink.period < 2000
    return bytes(sink.data)


def checked(data: bytes) -> dict[str, Any]:
    assert data.endswith(b"\n")
    assert len(data) <= LINE
    body, _, tail = data.rpartition(b',"crc":')
    assert tail == b'"%08x"}\n' % zlib.crc32(body)
    message: dict[str, Any] = json.loads(data)
    assert list(message)[-1] == "crc"
    assert data == json.dumps(message, separators=(",", ":"), ensure_ascii=False).encode() + b"\n", "compact JSON"
    return message


@pytest.mark.parametrize(("value", "expected"), ENCODE)
def test_text(value: Any, expected: str) -> None:
    assert text(value) == expected
    json.loads(expected)


_plain = st.none() | st.booleans() | st.integers() | st.text(st.characters(exclude_categories=["Cs"]), max_size=20)


@given(st.lists(st.tuples(st.text(st.characters(exclude_categories=["Cs"]), max_size=5), _plain), min_size=1, max_size=6))
def test_text_reads_back(pairs: list[tuple[str, Any]]) -> None:
    assert json.loads(text(pairs), object_pairs_hook=list) == pairs


@pytest.mark.parametrize("row", ROWS)
@pytest.mark.parametrize("rooms", [[64], [1], [0, 3, 0, 0, 7]])
def test_sample_line(row: tuple[int, ...], rooms: list[int]) -> None:
    ring = Ring(64)
    ring.sample(*row)
    line = Line(7)
    line.begin_sample(ring, 0)
    message = checked(sent(line, rooms))
    assert message == {
        "jsonrpc": "2.0",
        "method": "samples",
        "params": {"n": 0, "boot": 7, "rows": [[0, *row]]},
        "crc": message["crc"],
    }
    assert not line.busy


@pytest.mark.parametrize("numbers", [1, 6, 17, 100])
def test_a_sample_may_be_filled_in_any_number_of_pieces(numbers: int) -> None:
    ring = Ring(64)
    ring.sample(*ROWS[2])
    line = Line(7)
    line.begin_sample(ring, 0)
    assert checked(sent(line, [64], numbers=numbers))["params"]["rows"] == [[0, *ROWS[2]]]


def test_the_longest_sample_line_fits() -> None:
    """Every number of a row at its longest, `n` at 30 bits, a seven-digit boot."""
    ring = Ring(64)
    ring.n = ring.first = 2**30 - 1
    longest = (2**30 - 1, 11, 2, 1, 31, -1015808, -32768, -32768, 31, -1015808, -32768, -32768, 31, -32768, -32768, 15, 1)
    ring.sample(*longest)
    line = Line(9999999)
    line.begin_sample(ring, 2**30 - 1)
    data = sent(line, [64])
    assert checked(data)["params"]["rows"] == [[2**30 - 1, *longest]]
    assert len(data) <= 240, "a sample line stays short: ten a second on the slowest link"


EVENTS = (
    ("state", lambda ring: ring.state(5, DWELL, ST_DWELL, "up"), {"t": 5, "state": "dwell", "stage": "dwell", "why": "up"}),
    (
        "fault",
        lambda ring: ring.fault(-1, FAULT_LID_OPEN, DWELL, 3),
        {"t": -1, "fault": "lid_open", "state": "dwell", "value": 3},
    ),
    (
        "done",
        lambda ring: ring.done(9, 2, "k", END_SHORT, FAULT_NONE, [("look_pf", 0), ("short_na", 1)]),
        {"t": 9, "run": 2, "run_key": "k", "end": "short", "fault": None, "look_pf": 0, "short_na": 1},
    ),
    ("log", lambda ring: ring.log(1, 'raised OSError("é")'), {"t": 1, "text": 'raised OSError("é")'}),
)


@pytest.mark.parametrize(("method", "put", "params"), EVENTS, ids=[event[0] for event in EVENTS])
def test_event_line(method: str, put: Any, params: dict[str, Any]) -> None:
    ring = Ring(64)
    put(ring)
    line = Line(3)
    line.begin_event(ring, 0)
    message = checked(sent(line, [9]))
    assert message["method"] == method
    assert message["params"] == {"n": 0, "boot": 3, **params}
    assert list(message["params"])[:3] == ["n", "boot", "t"]


def test_a_text_that_does_not_fit_is_refused_and_the_line_stays_free() -> None:
    line = Line(1)
    room = LINE - 19 - len('{"result":""')
    assert not line.begin_text('{"result":"' + "x" * (room + 1) + '"')
    assert not line.busy
    assert line.begin_text('{"result":"' + "x" * room + '"')
    assert len(sent(line, [64])) == LINE


def test_one_line_serves_after_another() -> None:
    ring = Ring(64)
    line = Line(1)
    for row in ROWS * 2:
        ring.sample(*row)
        line.begin_sample(ring, ring.n - 1)
        assert checked(sent(line, [5]))["params"]["rows"] == [[ring.n - 1, *row]]


@given(st.integers(-(2**34), 2**34))
def test_numbers(value: int) -> None:
    line = Line(1)
    line._number(value)
    assert line._buffer[: line._length] == str(value).encode()
