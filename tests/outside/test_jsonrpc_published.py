"""The example exchanges of the JSON-RPC 2.0 specification, section 7 (www.jsonrpc.org/specification), against the box's wire.

What the specification's server computes (subtract, sum, ...) the box does not; its calls therefore show how the box answers a
method it lacks. Stated deviations (protocol/README.md): an array, whatever is in it, gets one error -32600 with id null instead
of a batch's answers; parameters are taken by name only; the checksum stands beside the published members.

The exchanges are the specification's own, compared by code and id; its texts of the errors too, from memory without the full
stop that some editions put behind them.
"""

from __future__ import annotations

import json
import zlib
from typing import Any

import pytest

from dwellbox.codes import ERRORS
from dwellbox.ring import Ring
from dwellbox.wire import Wire

NOTHING: list[Any] = []


class _Link:
    """A link with room, and bytes that wait."""

    def __init__(self, data: bytes) -> None:
        self.data = list(data)
        self.sent = bytearray()

    def now_ms(self) -> int:
        return 0

    def get(self) -> int:
        return self.data.pop(0) if self.data else -1

    def room(self) -> int:
        return 64

    def put(self, byte: int) -> None:
        self.sent.append(byte)


class _Never:
    """None of the published calls may reach the box."""

    def call(self, method: str, params: dict[str, Any], crc_ok: bool) -> None:
        raise AssertionError(f"{method} was executed")


def answers(text: str, with_crc: bool) -> list[dict[str, Any]]:
    data = text.encode()
    if with_crc:
        body = data.rstrip()[:-1]
        data = body + b',"crc":"%08x"}' % zlib.crc32(body)
    link = _Link(data + b"\n")
    wire = Wire(link, Ring(64), _Never(), 1)
    for _ in range(200):
        wire.step(0)
    return [json.loads(line) for line in bytes(link.sent).splitlines()]


def _error(code: int, id_: Any) -> dict[str, Any]:
    return {"code": code, "id": id_}


# (what is sent, the answer as published for a method the server lacks, or the stated deviation)
CALLS = (
    ('{"jsonrpc": "2.0", "method": "subtract", "params": [42, 23], "id": 1}', [_error(-32601, 1)]),
    ('{"jsonrpc": "2.0", "method": "subtract", "params": [23, 42], "id": 2}', [_error(-32601, 2)]),
    (
        '{"jsonrpc": "2.0", "method": "subtract", "params": {"subtrahend": 23, "minuend": 42}, "id": 3}',
        [_error(-32601, 3)],
    ),
    (
        '{"jsonrpc": "2.0", "method": "subtract", "params": {"minuend": 42, "subtrahend": 23}, "id": 4}',
        [_error(-32601, 4)],
    ),
    # notifications, known or not: no answer
    ('{"jsonrpc": "2.0", "method": "update", "params": [1,2,3,4,5]}', NOTHING),
    ('{"jsonrpc": "2.0", "method": "foobar"}', NOTHING),
    # call of a method that is not there
    ('{"jsonrpc": "2.0", "method": "foobar", "id": "1"}', [_error(-32601, "1")]),
)

# exactly as published
BROKEN = (
    ('{"jsonrpc": "2.0", "method": "foobar, "params": "bar", "baz]', [_error(-32700, None)]),
    ('{"jsonrpc": "2.0", "method": 1, "params": "bar"}', [_error(-32600, None)]),
    (
        '[ {"jsonrpc": "2.0", "method": "sum", "params": [1,2,4], "id": "1"}, {"jsonrpc": "2.0", "method" ]',
        [_error(-32700, None)],
    ),
    ("[]", [_error(-32600, None)]),
)

# the deviation: a batch gets one error, not one for each member, and is never executed
BATCHES = (
    "[1]",
    "[1,2,3]",
    "["
    '{"jsonrpc": "2.0", "method": "sum", "params": [1,2,4], "id": "1"}, '
    '{"jsonrpc": "2.0", "method": "notify_hello", "params": [7]}, '
    '{"jsonrpc": "2.0", "method": "subtract", "params": [42,23], "id": "2"}, '
    '{"foo": "boo"}, '
    '{"jsonrpc": "2.0", "method": "foo.get", "params": {"name": "myself"}, "id": "5"}, '
    '{"jsonrpc": "2.0", "method": "get_data", "id": "9"}'
    "]",
    '[{"jsonrpc": "2.0", "method": "notify_sum", "params": [1,2,4]}, '
    '{"jsonrpc": "2.0", "method": "notify_hello", "params": [7]}]',
)


def brief(lines: list[dict[str, Any]]) -> list[dict[str, Any]]:
    for line in lines:
        assert line["jsonrpc"] == "2.0"
        assert "result" not in line
    return [_error(line["error"]["code"], line["id"]) for line in lines]


@pytest.mark.parametrize("with_crc", [False, True], ids=["by hand", "sealed"])
@pytest.mark.parametrize(("sent", "expected"), CALLS)
def test_calls(sent: str, expected: list[Any], with_crc: bool) -> None:
    assert brief(answers(sent, with_crc)) == expected


@pytest.mark.parametrize(("sent", "expected"), BROKEN)
def test_broken(sent: str, expected: list[Any]) -> None:
    assert brief(answers(sent, False)) == expected


@pytest.mark.parametrize("sent", BATCHES)
def test_a_batch_gets_one_error(sent: str) -> None:
    assert brief(answers(sent, False)) == [_error(-32600, None)]


def test_the_published_texts() -> None:
    """Section 5.1 of the specification: code and message."""
    published = {
        -32700: "Parse error",
        -32600: "Invalid Request",
        -32601: "Method not found",
        -32602: "Invalid params",
        -32603: "Internal error",
    }
    assert {code: ERRORS[code] for code in published} == published
    assert all(-32099 <= code <= -32000 for code in ERRORS if code not in published), (
        "the implementation's own range"
    )
