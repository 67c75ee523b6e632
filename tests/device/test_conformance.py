"""What any box must answer, asked over pyserial like any host would: the emulated one in both interpreters, and a board on the bench.

    DWELLBENCH_TEST_BOX=/dev/ttyACM0 python -m pytest tests/device/test_conformance.py

Nothing here energises a part: every `run` is one that a box refuses. Every line that comes is held to its checksum and schema.
"""

from __future__ import annotations

import json
import os
import zlib
from collections.abc import Iterator
from typing import Any

import pytest
import serial

import dwellbench  # noqa: F401  (makes emu:// known)
from dwellbench.emulator import lockstep
from dwellbench.errors import UsageError
from dwellbench.wire import schemas
from dwellbench.wire.core import LINE_BYTES, unseal

BOXES = {"cpython": "emu://film?seed=4", "micropython": "emu://film?seed=4&interpreter=micropython"}
if "DWELLBENCH_TEST_BOX" in os.environ:
    BOXES["board"] = os.environ["DWELLBENCH_TEST_BOX"]
QUIET_S = 0.5


class Host:
    """Sends bytes, gives the answers back; notifications are checked and passed over."""

    def __init__(self, port: Any) -> None:
        self.port = port
        self._rest = b""

    def answers(self, data: bytes, count: int, one_by_one: bool = False) -> list[dict[str, Any]]:
        """The next `count` answers, and proof that no more come."""
        for piece in [bytes([byte]) for byte in data] if one_by_one else [data]:
            self.port.write(piece)
        found: list[dict[str, Any]] = []
        while len(found) < count:
            line = self._line(5.0)
            assert line, f"{len(found)} of {count} answers came"
            found += self._answer(line)
        while line := self._line(QUIET_S):
            found += self._answer(line)
        assert len(found) == count, found
        return found

    def one(self, data: bytes) -> dict[str, Any]:
        """The answer to one line."""
        return self.answers(data, 1)[0]

    def _line(self, timeout_s: float) -> bytes:
        self.port.timeout = timeout_s
        while b"\n" not in self._rest:
            more = self.port.read(1)
            if not more:
                return b""
            self._rest += more + self.port.read(self.port.in_waiting)
        line, _, self._rest = self._rest.partition(b"\n")
        return line

    def _answer(self, line: bytes) -> list[dict[str, Any]]:
        assert len(line) < LINE_BYTES
        message = unseal(line)
        assert json.dumps(message, separators=(",", ":"), ensure_ascii=False).encode() == line
        if "method" in message:
            schemas.check(f"event.{message['method']}", message)
            return []
        if "error" in message:
            schemas.check("error", message)
        return [message]


@pytest.fixture(scope="module", params=BOXES)
def host(request: pytest.FixtureRequest) -> Iterator[Host]:
    """A host at each box in turn, past whatever an earlier one left."""
    if request.param == "micropython":
        try:
            lockstep.interpreter()
        except UsageError:
            if os.environ.get("CI"):
                raise
            pytest.skip("no MicroPython on this computer")
    with serial.serial_for_url(BOXES[request.param], timeout=1) as port:
        port.write(b"\n")
        port.timeout = 1
        while port.read(1):
            port.read(port.in_waiting)
        yield Host(port)


def sealed(text: str, crc: str | None = None) -> bytes:
    """A line of a message that lacks its closing brace."""
    return f'{text},"crc":"{crc or format(zlib.crc32(text.encode()), "08x")}"}}\n'.encode()


def ask(method: str, params: str = "{}", id_: str = "1") -> bytes:
    """A sound request."""
    return sealed(f'{{"jsonrpc":"2.0","id":{id_},"method":"{method}","params":{params}')


LONG = '{"run_key":"' + "x" * 600 + '"}'
RUN = '"volts_mv":100000,"dwell_ms":1000'

# (what is sent, the id that comes back, the error's code or None)
ONE: dict[str, tuple[bytes, Any, int | None]] = {
    "hello": (ask("hello"), 1, None),
    "an id of text": (ask("hello", id_='"abcdefghijklmnop"'), "abcdefghijklmnop", None),
    "the least and the greatest id": (ask("hello", id_="0"), 0, None),
    "the greatest id": (ask("hello", id_="1073741823"), 1073741823, None),
    "without params": (sealed('{"jsonrpc":"2.0","id":1,"method":"hello"'), 1, None),
    "a carriage return": (ask("hello")[:-1] + b"\r\n", 1, None),
    "white space": (sealed('{ "jsonrpc" : "2.0" ,\t"id":1, "method":"hello" '), 1, None),
    "members in another order": (sealed('{"method":"hello","params":{},"id":1,"jsonrpc":"2.0"'), 1, None),
    "members that it does not know": (
        sealed('{"jsonrpc":"2.0","id":1,"method":"hello","params":{"x":[1,{"y":null}]},"later":"\\u00e9"'),
        1,
        None,
    ),
    "typed by hand: hello": (b'{"jsonrpc":"2.0","id":1,"method":"hello"}\n', 1, None),
    "typed by hand: status": (b'{"jsonrpc":"2.0","id":1,"method":"status"}\n', 1, None),
    "typed by hand: abort": (b'{"jsonrpc":"2.0","id":1,"method":"abort"}\n', 1, None),
    "typed by hand: anything else": (b'{"jsonrpc":"2.0","id":1,"method":"finish"}\n', 1, -32002),
    "a wrong checksum": (
        sealed('{"jsonrpc":"2.0","id":1,"method":"abort","params":{}', "00000000"),
        None,
        -32000,
    ),
    "a checksum in capitals": (ask("hello").replace(b"df3421d9", b"DF3421D9"), None, -32000),
    "no JSON": (sealed('{"jsonrpc":"2.0","id":1,"method":hello'), None, -32700),
    "rubbish": (b"\x00\xff\x03\x04 is anyone there?\n", None, -32700),
    "a number": (b"42\n", None, -32600),
    "an array": (b"[" + ask("hello")[:-1] + b"]\n", None, -32600),
    "an empty array": (b"[]\n", None, -32600),
    "another version of JSON-RPC": (
        sealed('{"jsonrpc":"1.0","id":1,"method":"hello","params":{}'),
        None,
        -32600,
    ),
    "no method": (sealed('{"jsonrpc":"2.0","id":1,"params":{}'), None, -32600),
    "an id of null": (ask("hello", id_="null"), None, -32600),
    "an id that is too large": (ask("hello", id_="1073741824"), None, -32600),
    "an id that is a fraction": (ask("hello", id_="1.5"), None, -32600),
    "an id that is too long": (ask("hello", id_='"abcdefghijklmnopq"'), None, -32600),
    "a method that is none": (ask("explode"), 1, -32601),
    "params by place": (ask("samples", "[0]"), 1, -32602),
    "a parameter of the wrong kind": (ask("samples", '{"from":"0"}'), 1, -32602),
    "a parameter that is missing": (ask("samples"), 1, -32602),
    "a fraction": (ask("run", '{"run_key":"a","volts_mv":1000.5,"dwell_ms":1000}'), 1, -32602),
    "a line that is too long": (ask("run", LONG), None, -32001),
    "a line of 10000 bytes": (b"x" * 10_000 + b"\n", None, -32001),
    "beyond the rating": (ask("run", '{"run_key":"a","volts_mv":99000000,"dwell_ms":1000}'), 1, 0),
    "a run_key that is too long": (ask("run", f'{{"run_key":"abcdefghijklmnopq",{RUN}}}'), 1, -32602),
    "finish with nothing under way": (ask("finish"), 1, -32010),
}


@pytest.mark.parametrize("name", ONE)
def test_one_line_one_answer(host: Host, name: str) -> None:
    data, id_, code = ONE[name]
    answer = host.one(data)
    assert answer["id"] == id_
    if code is None:
        assert "result" in answer
    elif code:
        assert answer["error"]["code"] == code
    else:
        assert "error" in answer, "refused, for whichever reason comes first on this box"


SILENT = {
    "an empty line": b"\n",
    "a carriage return alone": b"\r\n",
    "a sign of life": sealed('{"jsonrpc":"2.0","method":"keepalive","params":{}'),
    "a run without an id": sealed(f'{{"jsonrpc":"2.0","method":"run","params":{{"run_key":"a",{RUN}}}'),
    "a wrong request without an id": sealed('{"jsonrpc":"2.0","method":"samples","params":{}'),
    "a method that is none, without an id": sealed('{"jsonrpc":"2.0","method":"explode","params":{}'),
}


@pytest.mark.parametrize("name", SILENT)
def test_what_wants_no_answer_gets_none(host: Host, name: str) -> None:
    assert host.one(SILENT[name] + ask("hello", id_="77"))["id"] == 77


@pytest.mark.parametrize("one_by_one", [False, True], ids=["whole", "byte by byte"])
def test_lines_on_each_others_heels_are_answered_in_their_order(host: Host, one_by_one: bool) -> None:
    data = b"".join(
        ask(method, id_=str(n)) for n, method in enumerate(["hello", "status", "abort", "nothing"])
    )
    answers = host.answers(data, 4, one_by_one)
    assert [answer["id"] for answer in answers] == [0, 1, 2, 3]


def test_half_a_line_and_then_the_rest(host: Host) -> None:
    line = ask("status", id_="5")
    host.answers(line[:50], 0)
    assert host.one(line[50:])["id"] == 5


def test_hello_is_the_same_twice_and_meets_its_schema(host: Host) -> None:
    first, second = (host.one(ask("hello"))["result"] for _ in range(2))
    schemas.check("result.hello", {"jsonrpc": "2.0", "result": first, "id": 1, "crc": "00000000"})
    for name in ("protocol", "firmware", "build", "box", "boot", "ratings"):
        assert first[name] == second[name]
    assert first["protocol"][0] == 1


def test_status_meets_its_schema_and_nothing_is_energised_for_ever(host: Host) -> None:
    status = host.one(ask("status"))
    schemas.check("result.status", status)
    assert status["result"]["state"] in ("waking", "rest", "lockout")


def test_what_the_ring_has_comes_again(host: Host) -> None:
    page = host.one(ask("samples", '{"from":0,"count":3}'))["result"]
    assert page["next"] == page["from"] + page["count"]
    assert host.one(ask("samples", '{"from":1000000}'))["result"]["count"] == 0
