"""What the firmware takes is what the schemas allow: random requests judged by both, and whatever is sent answered by the schemas.

The reference is Python's json, made strict, with jsonschema. Where JSON Schema is wider than this wire the difference is stated
here: it calls 1.0 an integer, and knows no twofold member (tests/device/test_scan.py).
"""

from __future__ import annotations

import json
import zlib
from typing import Any

from hypothesis import given, settings
from hypothesis import strategies as st
from jsonschema import Draft7Validator

from dwellbench import assets
from dwellbench.wire import schemas
from dwellbox.codes import E_INVALID_PARAMS, E_INVALID_REQUEST, E_METHOD_NOT_FOUND
from dwellbox.ring import Ring
from dwellbox.rpc import PARAMS, Request, judge
from dwellbox.scan import Scanner
from dwellbox.wire import Wire

FOLDER = assets.protocol() / "schemas"
CHECKS = {
    method: Draft7Validator(json.loads((FOLDER / f"request.{method}.json").read_text(encoding="utf-8")))
    for method in PARAMS
}
FIXED = settings(derandomize=True, deadline=None, database=None, max_examples=600)


def sealed(body: bytes) -> bytes:
    """A line without its newline, from an object's text without its closing brace."""
    return body + b',"crc":"%08x"}' % zlib.crc32(body)


def line_of(message: Any) -> bytes:
    return sealed(json.dumps(message, separators=(",", ":")).encode()[:-1])


def judged(line: bytes) -> Request:
    scanner = Scanner()
    for byte in line:
        scanner.feed(byte)
    return judge(bytearray(line), len(line), scanner)


_odd = (
    st.none()
    | st.booleans()
    | st.sampled_from([0, -1, 1, 100, 101, 2**30 - 1, 2**30, 10**9 + 1, 10**14, 0.5, 1e300])
    | st.sampled_from(
        ["", "k", "x" * 16, "x" * 17, "settings", "calibration", "x" * 240, "x" * 241, "\u00e9"]
    )
    | st.sampled_from([[], [1], {}, {"a": 1}])
)

_MEMBERS = ("id", "params", "jsonrpc", "more")


@st.composite
def _good(draw: st.DrawFn, kind: type, least: int, most: int) -> Any:
    if kind is int:
        return draw(st.sampled_from([least, most]) | st.integers(least, most))
    if kind is bool:
        return draw(st.booleans())
    if (least, most) == (1, 16):
        return draw(st.sampled_from(["settings", "calibration", "k", "x" * 16]))
    return draw(st.text("ab1 ", min_size=least, max_size=12))


@st.composite
def _wrong(draw: st.DrawFn, kind: type, least: int, most: int) -> Any:
    """Just outside its bounds, or of another kind; now and then right all the same."""
    if kind is int:
        return draw(st.sampled_from([least - 1, most + 1]) | _odd)
    if kind is str:
        return draw(st.sampled_from(["x" * max(least - 1, 0), "x" * (most + 1)]) | _odd)
    return draw(_odd)


@st.composite
def requests(draw: st.DrawFn) -> dict[str, Any]:
    """A request of a known method, right or with one thing wrong."""
    method = draw(st.sampled_from(sorted(PARAMS)) | st.sampled_from(["run", "samples", "settings"]))
    names = [row[0] for row in PARAMS[method]]
    spoilt = draw(st.none() | st.sampled_from([*names, "later", "", *_MEMBERS]))
    params: dict[str, Any] = {}
    for name, kind, least, most, required in PARAMS[method]:
        if name == spoilt:
            if draw(st.integers(0, 4)):
                params[name] = draw(_wrong(kind, least, most))
        elif required or draw(st.booleans()):
            params[name] = draw(_good(kind, least, most))
    message: dict[str, Any] = {
        "jsonrpc": "2.0",
        "id": draw(st.integers(0, 2**30 - 1)),
        "method": method,
        "params": params,
    }
    if spoilt in _MEMBERS:
        message[spoilt] = draw(_odd)
    elif spoilt is not None and spoilt not in names:
        params[spoilt] = draw(_odd)
    return message


def allowed(message: dict[str, Any]) -> bool:
    """What the schema says, and beyond it: nothing that the firmware itself would refuse only after it was judged."""
    return bool(CHECKS[message["method"]].is_valid({**message, "crc": "00000000"}))


@FIXED
@given(requests())
def test_the_firmware_takes_what_the_schemas_allow(message: dict[str, Any]) -> None:
    line = line_of(message)
    if len(line) > 511:
        return
    request = judged(line)
    of = message["params"].get("of") if isinstance(message["params"], dict) else None
    if message["method"] == "settings" and isinstance(of, str) and of not in ("settings", "calibration"):
        return  # judged by the settings themselves, with the same error
    assert (request.error == 0) == allowed(message), (message, request.error, request.data)
    if request.error == 0:
        known = {row[0] for row in PARAMS[message["method"]]}
        assert request.params == {name: value for name, value in message["params"].items() if name in known}
        assert (request.id, request.method, request.crc_ok) == (message["id"], message["method"], True)
    else:
        assert request.error in (E_INVALID_REQUEST, E_INVALID_PARAMS)


@FIXED
@given(st.text(max_size=20).filter(lambda name: name not in PARAMS), st.integers(0, 2**30 - 1))
def test_every_other_method_is_not_found(method: str, id_: int) -> None:
    request = judged(line_of({"jsonrpc": "2.0", "id": id_, "method": method, "params": {}}))
    assert (request.error, request.id) == (E_METHOD_NOT_FOUND, id_)


class _Link:
    """A link with all the room there is."""

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


class _Handler:
    """Answers nothing, so that every result is an object without members."""

    def call(self, method: str, params: dict[str, Any], crc_ok: bool) -> list[tuple[str, Any]]:
        return []


def _spoilt(line: bytes, place: int, byte: int) -> bytes:
    changed = bytearray(line)
    changed[place % len(changed)] = byte
    return bytes(changed)


_lines = st.one_of(
    requests().map(line_of),
    requests().map(lambda message: json.dumps(message).encode()),
    st.builds(_spoilt, requests().map(line_of), st.integers(0, 511), st.integers(0, 255)),
    st.binary(max_size=40),
)


@FIXED
@given(st.lists(_lines, min_size=1, max_size=3))
def test_every_answer_is_a_result_or_an_error_by_its_schema(lines: list[bytes]) -> None:
    link = _Link(b"\n".join(lines) + b"\n")
    wire = Wire(link, Ring(64), _Handler(), 1)
    for _ in range(40):
        wire.step(0)
    while link.data or wire.pending():
        wire.step(0)
    for line in bytes(link.sent).splitlines():
        message = json.loads(line)
        assert line == line_of({name: value for name, value in message.items() if name != "crc"})
        if "result" not in message:
            schemas.check("error", message)
