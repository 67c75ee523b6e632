"""The checksum: against published check values and zlib, in any number of pieces."""

from __future__ import annotations

import zlib

import pytest
from hypothesis import given
from hypothesis import strategies as st
from wire_vectors import CRC

from dwellbox.crc import Crc


def digits(data: bytes, crc: Crc | None = None) -> str:
    crc = crc or Crc()
    crc.begin()
    for byte in data:
        crc.add(byte)
    out = bytearray(10)
    crc.hex_into(out, 1)
    assert out[0] == out[9] == 0, "writes eight digits and nothing else"
    return out[1:9].decode()


@pytest.mark.parametrize(("data", "expected"), CRC)
def test_vector(data: bytes, expected: str) -> None:
    assert digits(data) == expected == f"{zlib.crc32(data):08x}"


def test_the_same_object_serves_line_after_line() -> None:
    crc = Crc()
    for data, expected in CRC * 2:
        assert digits(data, crc) == expected


@given(st.binary(max_size=600))
def test_agrees_with_zlib(data: bytes) -> None:
    assert digits(data) == f"{zlib.crc32(data):08x}"


@given(st.binary(min_size=1, max_size=64), st.integers(0, 511))
def test_any_flipped_bit_changes_it(data: bytes, bit: int) -> None:
    bit %= 8 * len(data)
    other = bytearray(data)
    other[bit // 8] ^= 1 << bit % 8
    assert digits(bytes(other)) != digits(data)


def test_halves_stay_small_integers_of_the_board() -> None:
    """The board's small integers have 31 bits; each half must stay within 16."""
    crc = Crc()
    for byte in bytes(range(256)) * 2:
        crc.add(byte)
        assert 0 <= crc._high < 1 << 16
        assert 0 <= crc._low < 1 << 16
