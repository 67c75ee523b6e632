"""Sample rows in few bytes, without loss."""

from __future__ import annotations

import struct
import zlib

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from tests.records.contents import ROWS, rows

from dwellbench.records.packing import hash_of, pack, unpack

ANY_NUMBER = st.one_of(
    st.integers(-(2**31), 2**31 - 1), st.sampled_from([-(2**31), 2**31 - 1, 2**30, -(2**30), 0])
)


@given(st.lists(st.lists(ANY_NUMBER, min_size=18, max_size=18), max_size=30))
def test_rows_are_packed_without_loss(table: list[list[int]]) -> None:
    """Whatever 32 bits hold; the wire's own bounds are within 31."""
    assert unpack(pack(table)).tolist() == table
    assert hash_of(unpack(pack(table))) == hash_of(table)


@pytest.mark.parametrize(
    "table", [[[2**31] * 18], [[-(2**31) - 1] * 18], [[1] * 17], [[1] * 19], [[2**70] * 18]]
)
def test_what_is_no_sample_row_is_refused(table: list[list[int]]) -> None:
    with pytest.raises((ValueError, OverflowError)):
        pack(table)


@given(st.binary(max_size=60))
def test_other_bytes_are_told_from_rows(data: bytes) -> None:
    with pytest.raises(ValueError):
        unpack(data)


@given(at=st.integers(0, 10**6), bit=st.integers(0, 7))
def test_a_flipped_bit_never_gives_other_rows(at: int, bit: int) -> None:
    packed = bytearray(pack(ROWS))
    packed[at % len(packed)] ^= 1 << bit
    try:
        table = unpack(bytes(packed))
    except ValueError:
        return
    assert table.tolist() == ROWS  # zlib has bits that say how it was packed and nothing about what


@pytest.mark.parametrize("cut", [0, 3, 8, 9, 40, -1])
def test_a_cut_piece_is_told_from_rows(cut: int) -> None:
    with pytest.raises(ValueError):
        unpack(pack(ROWS)[:cut])
    with pytest.raises(ValueError):
        unpack(pack(ROWS) + b"x")


def test_a_piece_that_would_swell_is_not_unpacked() -> None:
    """A megabyte of zeros under a head that says one row: no more than that row is taken from it."""
    with pytest.raises(ValueError):
        unpack(struct.pack("<4sI", b"row1", 1) + zlib.compress(bytes(10**6)))


def test_the_form_on_disk_stays_what_it_is() -> None:
    """Worked out by hand from the description: heads, differences column by column, 32 bits, little-endian."""
    two = [[5] * 18, [7] * 18]
    packed = pack(two)
    assert packed[:8] == b"row1" + (2).to_bytes(4, "little")
    assert zlib.decompress(packed[8:]) == b"\x05\0\0\0\x02\0\0\0" * 18


def test_a_run_takes_a_small_part_of_its_size_as_text() -> None:
    table = rows(855)
    text = len("\n".join(",".join(map(str, row)) for row in table))
    assert len(pack(table)) < text / 8
    assert np.array_equal(unpack(pack(table)), table)
