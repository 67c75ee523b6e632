"""Digits, checksum and bytes of a line: published check values, zlib and str, on `plain` and on `native`.

`native` is machine code on the board. Here it is read as Python with every number held to 32 bits, as the board's processor holds
them; MicroPython itself runs it, with words of 64 bits, over the same vectors in `on_micropython.py`.
"""

from __future__ import annotations

import struct
import sys
import types
import zlib
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from wire_vectors import CRC, NUMBERS, ROWS

from dwellbox import plain, row

NATIVE = Path(plain.__file__).with_name("native.py")


class Word(int):
    """A whole number of 32 bits that wraps, as in a register."""

    def __new__(cls, value: int) -> Word:
        return super().__new__(cls, (value + 2**31 & 0xFFFFFFFF) - 2**31)


def _wrapping(name: str) -> Any:
    plainly = getattr(int, name)
    return lambda self, other: Word(plainly(self, other))


for _name in ("add", "sub", "mul", "floordiv", "lshift", "rshift", "and", "or", "xor"):
    for _side in ("", "r"):
        setattr(Word, f"__{_side}{_name}__", _wrapping(f"__{_side}{_name}__"))


class Pointer:
    """Memory read and written without a bound, so that going beyond one must show: by an error here."""

    def __init__(self, memory: Any) -> None:
        self.memory = memory

    def __getitem__(self, place: int) -> Word:
        assert place >= 0
        return Word(self.memory[place])

    def __setitem__(self, place: int, value: int) -> None:
        assert place >= 0
        self.memory[place] = value & 255


def read_native() -> types.SimpleNamespace:
    """The functions of native.py, their machine's words standing for the compiler's."""
    names: dict[str, Any] = {"__name__": "dwellbox.native", "__package__": "dwellbox"}
    names.update({"int": Word, "ptr8": Pointer, "ptr32": Pointer})
    before = sys.modules.get("micropython")
    sys.modules["micropython"] = types.SimpleNamespace(viper=lambda function: function)  # type: ignore[assignment]
    try:
        exec(compile(NATIVE.read_text(encoding="utf-8"), str(NATIVE), "exec"), names)
    finally:
        del sys.modules["micropython"]
        if before is not None:
            sys.modules["micropython"] = before
    return types.SimpleNamespace(**names)


BOTH = pytest.mark.parametrize("made", [plain, read_native()], ids=["plain", "native"])


def crc(made: Any, data: bytes) -> str:
    out = bytearray(10)
    made.hex_crc(data + b"what follows is not its business", len(data), out, 1)
    assert out[0] == out[9] == 0, "writes eight digits and nothing else"
    return out[1:9].decode()


@BOTH
@pytest.mark.parametrize(("data", "expected"), CRC)
def test_checksum_vectors(made: Any, data: bytes, expected: str) -> None:
    assert crc(made, data) == expected == f"{zlib.crc32(data):08x}"


@BOTH
@given(data=st.binary(max_size=600))
def test_checksum_agrees_with_zlib(made: Any, data: bytes) -> None:
    assert crc(made, data) == f"{zlib.crc32(data):08x}"


@BOTH
@given(data=st.binary(min_size=1, max_size=64), bit=st.integers(0, 511))
def test_any_flipped_bit_changes_the_checksum(made: Any, data: bytes, bit: int) -> None:
    bit %= 8 * len(data)
    other = bytearray(data)
    other[bit // 8] ^= 1 << bit % 8
    assert crc(made, bytes(other)) != crc(made, data)


def written(put: Any, *arguments: Any) -> str:
    """What a function writes at place 3 of a buffer; it says where that ends and leaves the rest alone."""
    buffer = bytearray(b"~" * 300)
    end = put(buffer, 3, *arguments)
    assert buffer[:3] == b"~~~"
    assert set(buffer[end:]) == {ord("~")}
    return buffer[3:end].decode()


@BOTH
@pytest.mark.parametrize("value", NUMBERS)
def test_number_vectors(made: Any, value: int) -> None:
    assert written(made.put_number, value) == str(value)


@BOTH
@given(value=st.integers(-(2**30), 2**30 - 1))
def test_numbers_agree_with_str(made: Any, value: int) -> None:
    assert written(made.put_number, value) == str(value)


@BOTH
@given(data=st.binary(max_size=60).filter(lambda data: b"~" not in data), more=st.integers(0, 9))
def test_bytes_are_copied(made: Any, data: bytes, more: int) -> None:
    buffer = bytearray(b"~" * 80)
    assert made.put_bytes(buffer, 5, data + b"x" * more, len(data)) == 5 + len(data)
    assert buffer == b"~" * 5 + data + b"~" * (75 - len(data))


_count = st.integers(0, 31)
_short = st.integers(-32768, 32767)
_sum = st.integers(-31 * 32768, 31 * 32767)
_bit = st.integers(0, 1)
_numbers = st.tuples(
    st.integers(0, 2**30 - 1), st.integers(0, 11), st.integers(0, 2), _bit, _count, _sum, _short, _short,
    _count, _sum, _short, _short, _count, _short, _short, st.integers(0, 15), _bit,
)  # fmt: skip


def packed(numbers: tuple[int, ...]) -> bytes:
    """As the ring packs a sample (its own packing is tested with the ring)."""
    t, stage, shunt, range_, nv, sv, vmin, vmax, ni, si, imin, imax, iclip, vs, temp, flags, vrange = numbers
    first = 0 | vrange << 3 | stage << 4
    second = shunt | range_ << 2 | flags << 4
    return struct.pack(
        row.FORM, first, second, t, sv, si, vmin, vmax, imin, imax, vs, temp, nv | ni << 5 | iclip << 10
    )


def rows_text(made: Any, numbers: tuple[int, ...], start: int) -> str:
    def put(buffer: bytearray, at: int) -> int:
        return int(made.put_row(b"\xaa" * start + packed(numbers) + b"\xaa", start, buffer, at))

    return written(put)


@BOTH
@pytest.mark.parametrize("numbers", ROWS)
@pytest.mark.parametrize("start", [0, 28])
def test_row_vectors(made: Any, numbers: tuple[int, ...], start: int) -> None:
    assert rows_text(made, numbers, start) == "".join(f",{number}" for number in numbers)


@BOTH
@given(numbers=_numbers)
def test_rows_agree_with_str(made: Any, numbers: tuple[int, ...]) -> None:
    assert rows_text(made, numbers, 28) == "".join(f",{number}" for number in numbers)


def test_the_table_of_fields_and_the_form_are_one_layout() -> None:
    """Each bit of a packed row belongs to one number, but for those of the kind and one to spare."""
    used = 0
    for place in range(0, len(row.FIELDS), 3):
        offset, shift, mask = row.FIELDS[place : place + 3]
        bits = (mask << shift if mask else (1 << (32 if shift else 16)) - 1) << 8 * offset
        assert not used & bits
        used |= bits
    assert used == (1 << 8 * row.SIZE) - 1 & ~0b111 & ~(1 << 11)
