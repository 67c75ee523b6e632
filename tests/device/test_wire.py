"""Lines into the wire, a period at a time: bounded work whatever arrives, every line answered as the protocol says."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from link_board import IN_A_PERIOD, OUT_A_PERIOD, Bench, brief
from wire_vectors import JUDGE, ROWS, asked, sealed

from dwellbox.encode import LINE
from dwellbox.wire import Refusal


def expected_answers(error: int, data: str | None, id_: Any) -> list[tuple[Any, Any, Any]]:
    if error == 0:
        return [] if id_ is None else [(id_, None, None)]
    return [(id_, error, data)]


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
