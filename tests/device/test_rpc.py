"""A line judged: the first failure answers, in the stated order; each parameter is named that is missing or wrong."""

from __future__ import annotations

import json
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from wire_vectors import JUDGE, asked, sealed

from dwellbox.codes import E_INVALID_PARAMS
from dwellbox.rpc import BY_HAND, NO_ID, PARAMS, Request, crc_of, judge
from dwellbox.scan import Scanner


def judged(line: bytes, length: int | None = None) -> Request:
    """Judge the first `length` bytes of a buffer, of which the scanner has seen those."""
    length = len(line) if length is None else length
    scanner = Scanner()
    for byte in line[:length]:
        scanner.feed(byte)
    return judge(bytearray(line), length, scanner)


@pytest.mark.parametrize(("line", "error", "data", "id_"), JUDGE)
def test_vector(line: bytes, error: int, data: str | None, id_: Any) -> None:
    for tail in (b"", b"\x00", b'{"left":"over from a longer line"}'):
        request = judged(line + tail, len(line))
        assert (request.error, request.data) == (error, data)
        if id_ is None:
            assert request.id is NO_ID or request.id is None
        else:
            assert request.id == id_
        if not error:
            assert request.params is not None
            assert request.crc_ok is (b'"crc":"' in line)


def test_the_checksum_is_right_wrong_or_not_there() -> None:
    line = asked("hello")
    assert crc_of(line, len(line)) is True
    assert crc_of(line.replace(b"hello", b"jello"), len(line)) is False
    assert crc_of(b'{"jsonrpc":"2.0"}', 17) is None
    assert crc_of(b"", 0) is None
    assert crc_of(b',"crc":"00000000"}', 18) is None, "a checksum of nothing is none"


def _least(kind: type, least: int) -> Any:
    return least if kind is int else "x" * least if kind is str else True


def _good(method: str, without: str | None = None, **other: Any) -> dict[str, Any]:
    """Every parameter of a method at its least."""
    params = {name: _least(kind, least) for name, kind, least, _, _ in PARAMS[method] if name != without}
    return {**params, **other}


def _wrong(kind: type, least: int, most: int) -> list[Any]:
    """Values that are wrong for a parameter: of every other JSON type, and just outside its bounds."""
    others: list[Any] = [None, [], {}, [1], 1.5]
    if kind is int:
        return [*others, "1", True, False, least - 1, most + 1, 10**16, float(least)]
    if kind is str:
        return [*others, 1, True, "x" * (most + 1), *([""] if least else [])]
    return [*others, 0, 1, "true"]


_RUN = json.dumps(_good("run"))
PAIRS = [(method, row) for method, rows in PARAMS.items() for row in rows]


@pytest.mark.parametrize(("method", "row"), PAIRS, ids=[f"{method}-{row[0]}" for method, row in PAIRS])
def test_each_wrong_parameter_is_named(method: str, row: tuple[str, type, int, int, bool]) -> None:
    name, kind, least, most, required = row
    for value in _wrong(kind, least, most):
        request = judged(asked(method, json.dumps(_good(method, **{name: value}))))
        assert (request.error, request.data) == (E_INVALID_PARAMS, name), value
        assert request.id == 1
    missing = judged(asked(method, json.dumps(_good(method, without=name))))
    assert (missing.error, missing.data) == ((E_INVALID_PARAMS, name) if required else (0, None))


@pytest.mark.parametrize(("method", "row"), PAIRS, ids=[f"{method}-{row[0]}" for method, row in PAIRS])
def test_bounds_are_inclusive(method: str, row: tuple[str, type, int, int, bool]) -> None:
    name, kind, least, most, _ = row
    for size in {least, most}:
        value = size if kind is int else "x" * size if kind is str else bool(size)
        request = judged(asked(method, json.dumps(_good(method, **{name: value}))))
        assert request.error == 0
        assert request.params[name] == value


@pytest.mark.parametrize("method", PARAMS)
def test_unknown_parameters_are_left_out(method: str) -> None:
    request = judged(asked(method, json.dumps(_good(method, later_version=[{"a": 1}]))))
    assert request.error == 0
    assert request.params == _good(method)


@pytest.mark.parametrize("method", PARAMS)
def test_without_a_checksum_only_asking_and_stopping(method: str) -> None:
    line = json.dumps({"jsonrpc": "2.0", "id": 1, "method": method, "params": _good(method)}).encode()
    assert (judged(line).error == 0) == (method in ("hello", "status", "abort")) == (method in BY_HAND)


@pytest.mark.parametrize(
    "line", [asked("run", _RUN), asked("finish"), asked("abort"), asked("maintenance", id_='"x"')]
)
def test_a_sealed_line_with_any_bit_changed_is_not_believed(line: bytes) -> None:
    """A damaged name of the checksum's member leaves a line without one: what may be typed by hand still may, nothing else."""
    for bit in range(8 * len(line)):
        damaged = bytearray(line)
        damaged[bit // 8] ^= 1 << bit % 8
        request = judged(bytes(damaged))
        assert not request.crc_ok, damaged
        assert request.error != 0 or request.method in BY_HAND, damaged


@given(st.binary(max_size=511))
def test_any_line_is_judged(line: bytes) -> None:
    request = judged(line)
    assert request.error != 0 or request.method in PARAMS
    sealed_request = judged(sealed(line) if line else sealed(b"{"))
    assert sealed_request.error != 0
