"""Lines in and out of the wire, a period at a time: bounded work whatever arrives, every line answered as the protocol says."""

from __future__ import annotations

import json
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from link_board import LinkBoard
from wire_vectors import JUDGE, ROWS, asked, sealed

from dwellbox.encode import LINE
from dwellbox.ring import Ring
from dwellbox.wire import Refusal, Wire

IN_A_PERIOD = 5
OUT_A_PERIOD = 14


class Handler:
    """Remembers what it was asked; refuses or raises where a test says so."""

    def __init__(self) -> None:
        self.calls: list[tuple[str, dict[str, Any], bool]] = []
        self.refuse: dict[str, Exception] = {}

    def call(self, method: str, params: dict[str, Any], crc_ok: bool) -> list[tuple[str, Any]]:
        self.calls.append((method, params, crc_ok))
        if method in self.refuse:
            raise self.refuse[method]
        return [("t", 5)]


class Bench:
    """A wire on a board of its own."""

    def __init__(self, room: int = 256, capacity: int = 64) -> None:
        self.board = LinkBoard(room)
        self.ring = Ring(capacity)
        self.handler = Handler()
        self.wire = Wire(self.board, self.ring, self.handler, 1)
        self.most_calls = 0

    def step(self, periods: int = 1) -> None:
        for _ in range(periods):
            before = len(self.handler.calls)
            self.wire.step(self.board.now)
            self.most_calls = max(self.most_calls, len(self.handler.calls) - before)
            self.board.end_period()

    def feed(self, data: bytes, gap: int = 0, periods: int = 0) -> list[dict[str, Any]]:
        """Send bytes, `gap` periods between each two (0: all at once), then step until all is read and answered."""
        if gap:
            for byte in data:
                self.board.incoming.append(byte)
                self.step(gap)
        else:
            self.board.incoming.extend(data)
        self.step(periods or len(data) // IN_A_PERIOD + 100)
        return self.lines()

    def lines(self) -> list[dict[str, Any]]:
        """The whole lines sent so far, each at most as long as allowed."""
        whole, _, rest = bytes(self.board.sent).rpartition(b"\n")
        self.board.sent[:] = rest
        for line in whole.split(b"\n"):
            assert len(line) < LINE
        return [json.loads(line) for line in whole.split(b"\n") if line]


def expected_answers(error: int, data: str | None, id_: Any) -> list[tuple[Any, Any, Any]]:
    if error == 0:
        return [] if id_ is None else [(id_, None, None)]
    return [(id_, error, data)]


def brief(lines: list[dict[str, Any]]) -> list[tuple[Any, Any, Any]]:
    return [
        (line["id"], line.get("error", {}).get("code"), line.get("error", {}).get("data")) for line in lines
    ]


def _answered(row: tuple[bytes, int, str | None, Any]) -> bool:
    """Requests without an id get no answer, right or wrong, unless nothing can be told of them."""
    _, error, _, id_ = row
    return id_ is not None or error in (-32700, -32600, -32000) or error == 0


VECTORS = [row for row in JUDGE if _answered(row)]


@pytest.mark.parametrize("gap", [0, 1], ids=["whole", "byte by byte"])
def test_every_vector_is_answered_whole_and_byte_by_byte(gap: int) -> None:
    bench = Bench()
    for line, error, data, id_ in VECTORS:
        lines = bench.feed(line + b"\n", gap)
        assert brief(lines) == expected_answers(error, data, id_), line


def test_vectors_one_after_another_without_a_pause_lose_nothing() -> None:
    bench = Bench()
    lines = bench.feed(b"\n".join(row[0] for row in VECTORS) + b"\n", periods=3000)
    assert brief(lines) == [answer for _, *row in VECTORS for answer in expected_answers(*row)]
    assert bench.wire.dropped == 0
    assert bench.most_calls == 1, "one line a period"


def test_bytes_after_a_line_belong_to_the_next() -> None:
    bench = Bench()
    line = asked("status")
    assert brief(bench.feed(line + b"\n" + line[:30])) == [(1, None, None)]
    assert brief(bench.feed(line[30:] + b"\n")) == [(1, None, None)]


@pytest.mark.parametrize("end", [b"\n", b"\r\n"])
def test_a_carriage_return_before_the_newline_is_accepted(end: bytes) -> None:
    assert brief(Bench().feed(asked("status") + end)) == [(1, None, None)]


def test_empty_lines_are_ignored() -> None:
    assert Bench().feed(b"\n\r\n\n") == []


def test_two_carriage_returns_are_not_one() -> None:
    assert brief(Bench().feed(asked("status") + b"\r\r\n")) == [(None, -32000, None)]


# ---- bounds


def test_work_of_a_period_is_bounded() -> None:
    """Counts, not wall time: bytes in, bytes out and lines executed in any one period."""
    bench = Bench()
    bench.feed(asked("hello") + b"\n")
    for _ in range(30):
        bench.ring.sample(*ROWS[2])
    bench.feed(
        (asked("status") + b"\n") * 40
        + b"\xff" * 3000
        + b"\n"
        + asked("samples", '{"from":0,"count":30}')
        + b"\n"
    )
    bench.step(2000)
    assert bench.board.most_taken <= IN_A_PERIOD
    assert bench.board.most_given <= OUT_A_PERIOD
    assert bench.most_calls <= 1


def test_many_lines_in_a_burst_are_executed_one_a_period() -> None:
    bench = Bench()
    bench.board.incoming.extend(b"\n" * 50 + asked("status") + b"\n")
    bench.step(50)
    assert bench.handler.calls == []
    bench.step(len(asked("status")) // IN_A_PERIOD + 3)
    assert len(bench.handler.calls) == 1


@pytest.mark.parametrize("length", [LINE, LINE + 1, 10_000])
def test_a_line_too_long_is_told_once_and_the_next_is_read(length: int) -> None:
    bench = Bench()
    lines = bench.feed(b"x" * (length - 1) + b"y\n" + asked("status") + b"\n")
    assert brief(lines) == [(None, -32001, None), (1, None, None)]


def test_the_longest_line_is_read() -> None:
    body = '{"jsonrpc":"2.0","id":1,"method":"status","params":{"x":""}'
    line = sealed(body.replace('""', '"' + "x" * (LINE - 1 - 18 - len(body)) + '"'))
    assert len(line) == LINE - 1
    assert brief(Bench().feed(line + b"\n")) == [(1, None, None)]


def test_an_endless_line_costs_no_more_than_its_bytes() -> None:
    bench = Bench()
    for _ in range(500):
        bench.board.incoming.extend(b'{"a":' * 10)
        bench.step()
    assert bench.wire._length < LINE
    assert bench.lines() == []


@given(st.lists(st.binary(max_size=80), max_size=8))
def test_any_bytes_are_answered_or_ignored(pieces: list[bytes]) -> None:
    bench = Bench()
    for piece in pieces:
        bench.board.incoming.extend(piece)
        bench.step()
    bench.board.incoming.append(10)
    bench.step(400)
    bench.lines()
    assert brief(bench.feed(asked("status") + b"\n")) == [(1, None, None)], "and the next good line is heard"


# ---- what is executed


def test_a_request_without_id_is_executed_and_not_answered() -> None:
    bench = Bench()
    assert bench.feed(sealed('{"jsonrpc":"2.0","method":"keepalive"') + b"\n") == []
    assert bench.handler.calls == [("keepalive", {}, True)]


def test_a_refusal_without_id_is_not_answered() -> None:
    bench = Bench()
    bench.handler.refuse["finish"] = Refusal(-32010, "rest")
    assert bench.feed(sealed('{"jsonrpc":"2.0","method":"finish"') + b"\n") == []
    assert bench.feed(sealed('{"jsonrpc":"2.0","method":"samples"') + b"\n") == [], "nor is a wrong parameter"
    assert bench.feed(b'{"jsonrpc":"2.0","method":"finish"}\n') == [], "nor a missing checksum"
    assert bench.handler.calls == [("finish", {}, True)]


def test_run_without_id_is_ignored() -> None:
    bench = Bench()
    line = sealed('{"jsonrpc":"2.0","method":"run","params":{"run_key":"k","volts_mv":1,"dwell_ms":1}')
    assert bench.feed(line + b"\n") == []
    assert bench.handler.calls == []


def test_a_refusal_carries_its_code_text_and_reason() -> None:
    bench = Bench()
    bench.handler.refuse["finish"] = Refusal(-32010, "rest")
    (line,) = bench.feed(asked("finish") + b"\n")
    assert line["error"] == {"code": -32010, "message": "Not in this state", "data": "rest"}
    assert list(line) == ["jsonrpc", "error", "id", "crc"]


@pytest.mark.parametrize("size", range(365, 380))
def test_reasons_too_long_for_a_line_are_left_out(size: int) -> None:
    """With the longest id, up to the last byte of a line."""
    bench = Bench()
    bench.handler.refuse["finish"] = Refusal(-32010, "x" * size)
    id_ = '"' + "\\\\" * 16 + '"'
    head = '{"jsonrpc":"2.0","error":{"code":-32010,"message":"Not in this state"'
    whole = sealed(f'{head},"data":"{"x" * size}"}},"id":{id_}') + b"\n"
    without = sealed(f'{head}}},"id":{id_}') + b"\n"
    bench.board.incoming.extend(asked("finish", id_=id_) + b"\n")
    bench.step(300)
    assert bench.board.sent == (whole if len(whole) <= LINE else without)


def test_a_defect_behind_the_wire_is_answered_and_the_loop_goes_on() -> None:
    bench = Bench()
    bench.handler.refuse["status"] = ZeroDivisionError("x" * 100)
    (line,) = bench.feed(asked("status") + b"\n")
    assert line["error"]["code"] == -32603
    assert "ZeroDivisionError" in line["error"]["data"]
    assert brief(bench.feed(asked("hello") + b"\n")) == [(1, None, None)]


def test_only_a_right_checksum_is_a_sign_of_life() -> None:
    bench = Bench()
    bench.step(100)
    heard = bench.wire.last_heard_ms
    bench.feed(b'{"jsonrpc":"2.0","id":1,"method":"status"}\n')
    bench.feed(asked("status")[:-4] + b'xy"}\n')
    bench.feed(b"rubbish\n")
    assert bench.wire.last_heard_ms == heard
    bench.feed(sealed('{"jsonrpc":"2.0","method":"keepalive"') + b"\n")
    assert bench.wire.last_heard_ms > heard


# ---- a host that does not read


def test_without_room_nothing_is_put_and_nothing_lost_for_a_while() -> None:
    bench = Bench()
    bench.board.capacity = 0
    bench.board.incoming.extend(b"1\n" * 8)
    bench.step(35)
    assert len(bench.board.incoming) == 2 * (8 - 4 - 1), "what has no room for its answer is not read yet"
    bench.board.capacity = 256
    bench.step(300)
    assert brief(bench.lines()) == [(None, -32600, "one object a line")] * 8
    assert bench.wire.dropped == 0


def test_a_host_that_never_reads_is_not_waited_for() -> None:
    """An abort must be executed, whether its answer can be sent or not."""
    bench = Bench()
    bench.board.capacity = 0
    bench.board.incoming.extend((asked("status") + b"\n") * 20 + asked("abort") + b"\n")
    bench.step(21 * 20)
    assert ("abort", {}, True) in bench.handler.calls
    assert bench.wire.dropped == 21 - 5, "four wait and one was under way"
    bench.board.capacity = 256
    assert brief(bench.feed(asked("status", id_="7") + b"\n", periods=200))[-1] == (7, None, None)


def test_a_trickle_of_room_is_enough() -> None:
    bench = Bench(room=1)
    assert brief(bench.feed((asked("status") + b"\n") * 6, periods=1200)) == [(1, None, None)] * 6
    assert bench.wire.dropped == 0


# ---- events


def _numbers(lines: list[dict[str, Any]]) -> list[int]:
    numbers = []
    for line in lines:
        if "method" in line:
            numbers += [row[0] for row in line["params"].get("rows", [[line["params"]["n"]]])]
    return numbers


def test_nothing_is_sent_before_hello_and_from_then_on_everything() -> None:
    bench = Bench()
    for _ in range(3):
        bench.ring.sample(*ROWS[1])
    bench.step(100)
    assert bench.lines() == []
    bench.feed(asked("hello") + b"\n")
    bench.ring.log(0, "a")
    bench.ring.sample(*ROWS[1])
    bench.step(100)
    assert _numbers(bench.lines()) == [3, 4]


def test_a_host_overtaken_by_the_ring_gets_the_oldest_kept_and_sees_the_gap() -> None:
    bench = Bench()
    bench.feed(asked("hello") + b"\n")
    bench.board.capacity = 0
    for _ in range(300):
        bench.ring.sample(*ROWS[1])
        bench.step()
    bench.board.capacity = 256
    bench.step(2000)
    numbers = _numbers(bench.lines())
    assert numbers[0] == 0, "the line that was under way"
    assert numbers[1:] == list(range(300 - bench.ring.capacity, 300))


def test_answers_go_before_events_that_wait() -> None:
    bench = Bench()
    bench.feed(asked("hello") + b"\n")
    bench.board.incoming.extend(asked("status") + b"\n")
    for _ in range(20):
        bench.ring.sample(*ROWS[1])
    bench.step(300)
    kinds = ["id" in line for line in bench.lines()]
    assert kinds.index(True) <= 1, "at most the one line that was under way is before it"


def test_samples_again() -> None:
    bench = Bench()
    for _ in range(100):
        bench.ring.sample(*ROWS[1])
    bench.feed(asked("hello") + b"\n")
    first = bench.ring.first
    for params, start, stop in (
        ('{"from":40,"count":5}', 40, 45),
        ('{"from":99}', 99, 100),
        ('{"from":0,"count":3}', max(first, 0), max(first, 0) + 3),
        ('{"from":500}', 100, 100),
    ):
        answer, *events = bench.feed(asked("samples", params) + b"\n", periods=200)
        assert answer["result"] == {"from": start, "count": stop - start, "next": stop}
        assert _numbers(events) == list(range(start, stop))


def test_samples_again_page_by_page_is_everything_kept() -> None:
    bench = Bench(capacity=128)
    for n in range(150):
        bench.ring.sample(n, *ROWS[1][1:])
    bench.feed(asked("hello") + b"\n")
    at, got = 0, []
    while True:
        answer, *events = bench.feed(asked("samples", f'{{"from":{at},"count":20}}') + b"\n", periods=300)
        if not answer["result"]["count"]:
            break
        got += [row[:2] for line in events for row in line["params"]["rows"]]
        at = answer["result"]["next"]
    assert got == [[n, n] for n in range(bench.ring.first, 150)]


def test_events_asked_for_again_are_skipped_when_written_over() -> None:
    bench = Bench()
    for _ in range(64):
        bench.ring.sample(*ROWS[1])
    bench.feed(asked("hello") + b"\n")
    bench.board.capacity = 0
    bench.board.incoming.extend(asked("samples", '{"from":0,"count":64}') + b"\n")
    for _ in range(64 + 30):
        bench.ring.sample(*ROWS[1])
        bench.step()
    bench.board.capacity = 256
    bench.step(3000)
    under_way, *numbers = _numbers(bench.lines())
    assert under_way == 64, "it was filled before"
    assert sorted(set(numbers)) == list(range(bench.ring.first, bench.ring.n))


def test_the_oldest_answers_are_whole_lines_even_after_a_long_stall() -> None:
    bench = Bench(room=7)
    bench.feed(asked("hello") + b"\n", periods=300)
    for k in range(200):
        bench.ring.sample(*ROWS[2])
        bench.board.capacity = 0 if k % 3 else 7
        bench.step()
    bench.board.capacity = 256
    bench.step(2000)
    for line in bench.lines():  # json and length checked there
        assert [row[1:] for row in line["params"]["rows"]] == [list(ROWS[2])] * len(line["params"]["rows"])


# ---- answers


class Answering(Bench):
    """A wire whose handler gives `pairs`."""

    def ask(self, pairs: list[tuple[str, Any]] | None) -> bytes:
        self.handler.call = lambda method, params, crc_ok: pairs  # type: ignore[method-assign]
        self.board.incoming.extend(asked("status") + b"\n")
        self.step(400)
        line = bytes(self.board.sent)
        self.board.sent.clear()
        return line


@pytest.mark.parametrize("count", range(12))
def test_a_result_of_any_number_of_members_keeps_their_order(count: int) -> None:
    pairs = [(f"m{7 * k % 12}", k) for k in range(count)]
    line = Answering().ask(pairs)
    body = '{"jsonrpc":"2.0","result":{' + ",".join(f'"{name}":{value}' for name, value in pairs) + '},"id":1'
    assert line == sealed(body) + b"\n"


def test_a_result_of_every_kind_of_value() -> None:
    pairs = [("a", None), ("b", [1, -2]), ("c", [("d", True), ("e", '\u20ac"\\\n')]), ("f", []), ("g", "")]
    assert json.loads(Answering().ask(pairs))["result"] == {
        "a": None,
        "b": [1, -2],
        "c": {"d": True, "e": '\u20ac"\\\n'},
        "f": [],
        "g": "",
    }


@pytest.mark.parametrize(
    "pairs", [[("a", "x" * 600)], [(f"member{k:02}", 2**29) for k in range(60)]], ids=["one", "many"]
)
def test_a_result_that_does_not_fit_is_a_defect_and_said_to_be_one(pairs: list[tuple[str, Any]]) -> None:
    bench = Answering()
    message = json.loads(bench.ask(pairs))
    assert message["error"] == {"code": -32603, "message": "Internal error", "data": "answer too long"}
    assert message["id"] == 1
    assert json.loads(bench.ask([("a", 1)]))["result"] == {"a": 1}


def test_the_longest_result_that_fits() -> None:
    head = len('{"jsonrpc":"2.0","result":{"a":""},"id":1,"crc":"00000000"}\n')
    assert len(Answering().ask([("a", "x" * (LINE - head))])) == LINE
    assert b"answer too long" in Answering().ask([("a", "x" * (LINE - head + 1))])


@pytest.mark.parametrize("pairs", [None, 5, [("a", object())], [5]])
def test_a_handler_that_gives_nonsense_is_answered_as_a_defect(pairs: Any) -> None:
    bench = Answering()
    assert json.loads(bench.ask(pairs))["error"]["code"] == -32603
    assert json.loads(bench.ask([]))["result"] == {}


def test_a_new_host_is_not_sent_what_another_asked_for() -> None:
    bench = Bench()
    for _ in range(60):
        bench.ring.sample(*ROWS[1])
    bench.feed(asked("hello") + b"\n")
    bench.board.incoming.extend(asked("samples", '{"from":0,"count":60}') + b"\n")
    bench.step(70)
    assert 0 < len(_numbers(bench.lines())) < 20
    bench.feed(asked("hello", id_="2") + b"\n", periods=1000)
    bench.ring.log(0, "live")
    bench.step(100)
    assert _numbers(bench.lines()) == [60]


def test_a_link_that_fails_costs_a_line_and_not_the_loop() -> None:
    bench = Bench()
    put = bench.board.put
    bench.board.put = lambda byte: 1 // 0  # type: ignore[method-assign]
    bench.feed(asked("status") + b"\n" + asked("abort") + b"\n")
    assert [call[0] for call in bench.handler.calls] == ["status", "abort"]
    assert bench.wire.dropped == 2
    bench.board.put = put  # type: ignore[method-assign]
    assert brief(bench.feed(asked("status") + b"\n")) == [(1, None, None)]


def test_an_event_that_is_none_is_told_and_the_stream_goes_on() -> None:
    bench = Bench()
    bench.feed(asked("hello") + b"\n")
    bench.ring.fault(0, 99, 0, 0)
    bench.ring.done(0, 1, "key", 0, 0, [("look_pf", object())])
    bench.ring.sample(*ROWS[1])
    bench.step(200)
    lines = bench.lines()
    assert _numbers(lines) == [0, 1, 2]
    assert [line["method"] for line in lines] == ["log", "log", "samples"]
    assert lines[0]["params"]["text"].startswith("event unreadable: IndexError")
