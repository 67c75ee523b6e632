"""The scanner takes exactly what RFC 8259 takes, less what this wire refuses on purpose, whatever way the bytes come.

Python's json, made strict (no NaN, no lone surrogates, strict UTF-8), stands for the RFC.
"""

from __future__ import annotations

import json
import re
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from wire_vectors import BAD, FRACTION, SCAN, TWICE

from dwellbox.scan import NOT_WHOLE, Scanner

DEPTH = 6
DIGITS = 15


def scan(text: bytes, scanner: Scanner | None = None) -> Any:
    scanner = scanner or Scanner()
    scanner.begin()
    for byte in text:
        scanner.feed(byte)
    return plain(scanner.value) if scanner.finish() else BAD


def plain(value: Any) -> Any:
    if value is NOT_WHOLE:
        return FRACTION
    if isinstance(value, list):
        return [plain(item) for item in value]
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    return value


def depth(value: Any) -> int:
    if isinstance(value, dict):
        return 1 + max([depth(item) for item in value.values()], default=0)
    if isinstance(value, list):
        return 1 + max([depth(item) for item in value], default=0)
    return 0


def lone_surrogate(value: Any) -> bool:
    if isinstance(value, str):
        return any(0xD800 <= ord(letter) <= 0xDFFF for letter in value)
    if isinstance(value, dict):
        return any(lone_surrogate(key) or lone_surrogate(item) for key, item in value.items())
    return isinstance(value, list) and any(lone_surrogate(item) for item in value)


def _whole(text: str) -> Any:
    return int(text) if len(text.lstrip("-")) <= DIGITS else FRACTION


def _refuse(text: str) -> Any:
    raise ValueError(text)


def by_python(text: bytes) -> Any:
    """What the RFC makes of it, with this wire's stated refusals."""
    try:
        value = json.loads(
            text.decode("utf-8"), parse_int=_whole, parse_float=lambda text: FRACTION, parse_constant=_refuse
        )
    except (ValueError, RecursionError):
        return BAD
    if depth(value) > DEPTH or lone_surrogate(value):
        return BAD
    return value


def same(a: Any, b: Any) -> bool:
    """Equal, and of the same types: True is not 1."""
    return bool(a == b) and json.dumps(a, sort_keys=True) == json.dumps(b, sort_keys=True)


@pytest.mark.parametrize(("text", "expected"), SCAN)
def test_vector(text: bytes, expected: Any) -> None:
    assert same(scan(text), expected)
    assert same(by_python(text), expected), "the vector itself must be what the RFC says"


@pytest.mark.parametrize(("text", "expected"), SCAN)
def test_vector_with_trailing_bytes(text: bytes, expected: Any) -> None:
    assert same(scan(text + b" \t\r"), by_python(text + b" \t\r"))
    assert scan(text + b" x") == BAD


def test_one_scanner_serves_line_after_line() -> None:
    scanner = Scanner()
    for text, expected in SCAN + SCAN[::-1]:
        assert same(scan(text, scanner), expected), text


@pytest.mark.parametrize("text", TWICE)
def test_a_member_that_stands_twice_is_told(text: bytes) -> None:
    scanner = Scanner()
    for byte in text:
        scanner.feed(byte)
    assert scanner.finish()
    assert scanner.twice
    scanner.begin()
    assert not scanner.twice


def test_finish_may_be_asked_only_when_whole() -> None:
    scanner = Scanner()
    for place, byte in enumerate(b'{"a":[1,"b"]}'):
        assert not scanner.finish(), place
        scanner.feed(byte)
    assert scanner.finish()


_scalars = st.none() | st.booleans() | st.integers(-(10**17), 10**17) | st.floats() | st.text(max_size=12)
_values = st.recursive(
    _scalars,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=6), inner, max_size=3),
    max_leaves=12,
)


@given(_values, st.booleans(), st.sampled_from([(",", ":"), (" , ", " : "), (",\t", ":\r\n")]))
def test_whatever_python_writes_is_read_alike(
    value: Any, ascii_only: bool, separators: tuple[str, str]
) -> None:
    text = json.dumps(value, ensure_ascii=ascii_only, separators=separators)
    data = text.encode("utf-8", "surrogatepass")
    if len(data) > 500:
        data = data[:500]
    assert same(scan(data), by_python(data))


_PIECES = [
    *(bytes([byte]) for byte in b'{}[]:,"\\ 0123456789-+.eEtrufalsn\x00\x1f\x7f\t'),
    *(
        b"true",
        b"null",
        b'"a"',
        b'"a":',
        b"\\u",
        b"\\ud83d",
        b"\\ude00",
        b"\xc3\xa9",
        b"\xed\xa0\x80",
        b"\xf4\x8f\xbf\xbf",
    ),
]


@settings(max_examples=600)
@given(st.lists(st.sampled_from(_PIECES), max_size=14).map(b"".join))
def test_rubbish_made_of_json_pieces_is_judged_alike(text: bytes) -> None:
    assert same(scan(text), by_python(text))


@given(st.sampled_from([text for text, _ in SCAN]), st.integers(0, 60), st.integers(0, 255))
def test_a_changed_byte_is_judged_alike(text: bytes, place: int, byte: int) -> None:
    changed = bytearray(text or b" ")
    changed[place % len(changed)] = byte
    assert same(scan(bytes(changed)), by_python(bytes(changed)))


@given(st.binary(max_size=600))
def test_any_bytes_are_taken(data: bytes) -> None:
    assert same(scan(data), by_python(data))


_NUMBER = re.compile(rb"-?(0|[1-9][0-9]*)(\.[0-9]+)?([eE][+-]?[0-9]+)?")


@given(st.text("0123456789-+.eE", max_size=18))
def test_numbers_follow_the_rfc_grammar(text: str) -> None:
    """RFC 8259 section 6, written out as a regular expression beside Python's own reading."""
    assert (scan(text.encode()) == BAD) == (_NUMBER.fullmatch(text.encode()) is None)
