"""Lines out of the wire: answers whole and in order, events by a cursor, a host that does not read, a link that fails."""

from __future__ import annotations

import json
from typing import Any

import pytest
from link_board import Bench, brief
from wire_vectors import ROWS, asked, sealed

from dwellbox.encode import LINE

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
