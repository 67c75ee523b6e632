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
from dwellbox.encode import BYTE_US, LINE, TAIL, Line, text
from dwellbox.encode import ROWS as ROWS_A_LINE
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


def sent(line: Line, rooms: list[int], us: int = 1000, ring: Ring | None = None) -> bytes:
    """Write the rest of a line, then send it, as the wire does; every period is bounded."""
    sink = Sink(rooms)
    while line.open:
        assert ring is not None
        line.write_row(ring)
    while line.busy:
        sink.next_period()
        before = len(sink.data)
        room = sink.left
        count = line.send(sink, us)
        assert count == len(sink.data) - before
        assert count <= -(-us // BYTE_US), "bounded work a period"
        assert count > 0 or room == 0
        assert sink.period < 2000
    return bytes(sink.data)


def checked(data: bytes) -> dict[str, Any]:
    assert data.endswith(b"\n")
    assert len(data) <= LINE
    body, _, tail = data.rpartition(b',"crc":')
    assert tail == b'"%08x"}\n' % zlib.crc32(body)
    message: dict[str, Any] = json.loads(data)
    assert list(message)[-1] == "crc"
    assert data == json.dumps(message, separators=(",", ":"), ensure_ascii=False).encode() + b"\n", (
        "compact JSON"
    )
    return message


@pytest.mark.parametrize(("value", "expected"), ENCODE)
def test_text(value: Any, expected: str) -> None:
    assert text(value) == expected
    json.loads(expected)


_plain = (
    st.none() | st.booleans() | st.integers() | st.text(st.characters(exclude_categories=["Cs"]), max_size=20)
)


_name = st.text("abcxyz_0", min_size=1, max_size=5)  # names are the firmware's own


@given(st.lists(st.tuples(_name, _plain), min_size=1, max_size=6))
def test_text_reads_back(pairs: list[tuple[str, Any]]) -> None:
    assert json.loads(text(pairs), object_pairs_hook=list) == pairs


@pytest.mark.parametrize("row", ROWS)
@pytest.mark.parametrize("rooms", [[64], [1], [0, 3, 0, 0, 7]])
def test_sample_line(row: tuple[int, ...], rooms: list[int]) -> None:
    ring = Ring(64)
    ring.sample(*row)
    line = Line(7)
    line.begin_samples(ring, 0, 1)
    message = checked(sent(line, rooms))
    assert message == {
        "jsonrpc": "2.0",
        "method": "samples",
        "params": {"n": 0, "boot": 7, "rows": [[0, *row]]},
        "crc": message["crc"],
    }
    assert not line.busy


@pytest.mark.parametrize(
    ("count", "stop", "lengths"), [(2, 2, [2]), (3, 3, [3]), (7, 7, [3, 3, 1]), (7, 2, [2])]
)
def test_rows_that_follow_each_other_share_a_line(count: int, stop: int, lengths: list[int]) -> None:
    ring = Ring(64)
    for k in range(count):
        ring.sample(k, *ROWS[1][1:])
    line = Line(7)
    n = 0
    for length in lengths:
        line.begin_samples(ring, n, stop)
        params = checked(sent(line, [64], ring=ring))["params"]
        assert params["n"] == n
        assert params["rows"] == [[m, m, *ROWS[1][1:]] for m in range(n, n + length)]
        n += length
        assert line.next_n == n


def test_rows_share_a_line_only_up_to_another_event() -> None:
    ring = Ring(64)
    ring.sample(*ROWS[0])
    ring.log(0, "between")
    ring.sample(*ROWS[1])
    line = Line(7)
    line.begin_samples(ring, 0, 3)
    assert checked(sent(line, [64]))["params"]["rows"] == [[0, *ROWS[0]]]
    line.begin_event(ring, line.next_n)
    assert checked(sent(line, [64]))["params"]["text"] == "between"
    assert line.next_n == 2


def test_the_longest_rows_fit() -> None:
    """Every number of a row at its longest, `n` at 30 bits, a seven-digit boot; as many rows as a line takes."""
    ring = Ring(64)
    first = 2**30 - 1 - ROWS_A_LINE
    ring.n = ring.first = first
    longest = (
        2**30 - 1,
        11,
        2,
        1,
        31,
        -1015808,
        -32768,
        -32768,
        31,
        -1015808,
        -32768,
        -32768,
        31,
        -32768,
        -32768,
        15,
        1,
    )
    for _ in range(ROWS_A_LINE):
        ring.sample(*longest)
    line = Line(9999999)
    line.begin_samples(ring, first, first + 1)
    data = sent(line, [64])
    assert checked(data)["params"]["rows"] == [[first, *longest]]
    assert len(data) <= 220, "a sample line stays short: ten a second on the slowest link"
    line.begin_samples(ring, first, ring.n)
    assert checked(sent(line, [64], ring=ring))["params"]["rows"] == [
        [first + k, *longest] for k in range(ROWS_A_LINE)
    ]


def test_rows_written_over_before_their_turn_are_left_out() -> None:
    ring = Ring(64)
    for k in range(64):
        ring.sample(k, *ROWS[1][1:])
    line = Line(7)
    line.begin_samples(ring, 0, 3)
    for _ in range(2):
        ring.log(0, "over the first two")
    assert checked(sent(line, [64], ring=ring))["params"]["rows"] == [
        [0, 0, *ROWS[1][1:]],
        [2, 2, *ROWS[1][1:]],
    ]


EVENTS = (
    (
        "state",
        lambda ring: ring.state(5, DWELL, ST_DWELL, "up"),
        {"t": 5, "state": "dwell", "stage": "dwell", "why": "up"},
    ),
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


def test_words_that_are_gone_are_told_as_gone() -> None:
    ring = Ring(512)
    for _ in range(200):
        ring.log(0, "a")
    line = Line(1)
    line.begin_event(ring, 3)
    params = checked(sent(line, [64]))["params"]
    assert (params["n"], params["text"]) == (3, "words no longer kept")


@pytest.mark.parametrize("letter", ["x", '"', "\x01", "\u20ac"])
def test_a_line_for_people_is_cut_or_replaced_never_too_long(letter: str) -> None:
    ring = Ring(64)
    ring.log(0, letter * 1000)
    line = Line(1)
    line.begin_event(ring, 0)
    said = checked(sent(line, [64]))["params"]["text"]
    assert said in (letter * 120, "words too long: log")


def test_the_longest_line_is_sent_whole() -> None:
    line = Line(1)
    data = b'{"result":"' + b"x" * (LINE - TAIL - 12) + b'"'
    line.begin_data(data, len(data))
    assert len(sent(line, [64])) == LINE


def test_one_line_serves_after_another() -> None:
    ring = Ring(64)
    line = Line(1)
    for row in ROWS * 2:
        ring.sample(*row)
        line.begin_samples(ring, ring.n - 1, ring.n)
        assert checked(sent(line, [5]))["params"]["rows"] == [[ring.n - 1, *row]]
