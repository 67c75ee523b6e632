"""The inner loops of a line going out, in machine code: digits, checksum, bytes.

As bytecode they would take 6 ms of every 100 ms on the reference board, 30 to 45 us a byte for the checksum alone, whose 32 bits
would be an object of the heap each time; so they take about 0.2 ms and touch no heap. `plain` holds the same functions for an
interpreter that does not make machine code, and one list of vectors holds both.

Nothing checks a bound in here. The callers do: no number is longer than eleven digits, and a row of them than 107 bytes.
Written for words of 32 bits and of 64 alike, with no constant above 30 bits; odd addresses are read a byte at a time, which the
board's processor insists on.
"""
# ruff: noqa: F821  (ptr8 and ptr32 are words of this compiler)

from array import array

import micropython

from .row import FIELDS

# CRC-32 (IEEE 802.3), reflected polynomial 0xEDB88320, four bits at a time.
_NIBBLES = array("I", (0, 0x1DB71064, 0x3B6E20C8, 0x26D930AC, 0x76DC4190, 0x6B6B51F4, 0x4DB26158, 0x5005713C))
_NIBBLES.extend(
    array(
        "I", (0xEDB88320, 0xF00F9344, 0xD6D6A3E8, 0xCB61B38C, 0x9B64C2B0, 0x86D3D2D4, 0xA00AE278, 0xBDBDF21C)
    )
)


@micropython.viper
def put_bytes(buffer, at: int, data, length: int) -> int:
    """Copy `length` bytes of `data` into `buffer` at `at`; return where they end."""
    target = ptr8(buffer)
    source = ptr8(data)
    place = 0
    while place < length:
        target[at] = source[place]
        at += 1
        place += 1
    return at


@micropython.viper
def put_number(buffer, at: int, value: int) -> int:
    """Write `value` (30 bits) in decimal digits; return where they end."""
    target = ptr8(buffer)
    if value < 0:
        target[at] = 45
        at += 1
        value = 0 - value
    end = at + 1
    rest = value // 10
    while rest > 0:
        end += 1
        rest = rest // 10
    at = end
    while True:
        rest = value // 10
        at -= 1
        target[at] = 48 + value - rest * 10
        value = rest
        if value == 0:
            break
    return end


@micropython.viper
def put_row(rows, start: int, buffer, at: int) -> int:
    """Write the seventeen numbers of the sample at `start` of `rows`, a comma before each; return where they end."""
    packed = ptr8(rows)
    fields = ptr8(FIELDS)
    target = ptr8(buffer)
    place = 0
    while place < 51:  # three bytes of the table for each of the seventeen
        first = start + fields[place]
        shift = fields[place + 1]
        mask = fields[place + 2]
        value = int(packed[first])
        high = int(packed[first + 1])
        if mask != 0:
            value = (value | high << 8) >> shift & mask
        elif shift == 0:
            value |= (high ^ 128) - 128 << 8
        else:
            value |= high << 8 | packed[first + 2] << 16
            high = int(packed[first + 3])
            value |= (high ^ 128) - 128 << 24
        target[at] = 44
        at = int(put_number(buffer, at + 1, value))
        place += 3
    return at


@micropython.viper
def hex_crc(buffer, length: int, into, at: int):
    """Write the CRC-32 of the first `length` bytes of `buffer` as eight lower-case hexadecimal digits at `at` of `into`."""
    data = ptr8(buffer)
    table = ptr32(_NIBBLES)
    target = ptr8(into)
    crc = 0 - 1
    place = 0
    while place < length:
        byte = int(data[place])
        crc = (crc >> 4 & 0x0FFFFFFF) ^ int(table[(crc ^ byte) & 15])
        crc = (crc >> 4 & 0x0FFFFFFF) ^ int(table[(crc ^ byte >> 4) & 15])
        place += 1
    shift = 28
    while shift >= 0:
        digit = (crc >> shift & 15) ^ 15
        if digit > 9:
            digit += 39
        target[at] = 48 + digit
        at += 1
        shift -= 4
