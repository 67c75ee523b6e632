"""What `native` does, through the interpreter's own library: for CPython, and for a MicroPython that makes no machine code.

There these allocate, which a desktop does not mind.
"""

import binascii
import struct

from .row import FORM


def put_bytes(buffer, at, data, length):
    """Copy `length` bytes of `data` into `buffer` at `at`; return where they end."""
    end = at + length
    buffer[at:end] = data[:length]
    return end


def put_number(buffer, at, value):
    """Write `value` in decimal digits; return where they end."""
    data = b"%d" % value
    end = at + len(data)
    buffer[at:end] = data
    return end


def put_row(rows, start, buffer, at):
    """Write the seventeen numbers of the sample at `start` of `rows`, a comma before each; return where they end."""
    first, second, t, sv, si, vmin, vmax, imin, imax, vs, temp, counts = struct.unpack_from(FORM, rows, start)
    of_part = (counts & 31, sv, vmin, vmax)
    of_shunt = (counts >> 5 & 31, si, imin, imax, counts >> 10)
    numbers = (
        (t, first >> 4, second & 3, second >> 2 & 1)
        + of_part
        + of_shunt
        + (vs, temp, second >> 4, first >> 3 & 1)
    )
    data = b",%d,%d,%d,%d,%d,%d,%d,%d,%d,%d,%d,%d,%d,%d,%d,%d,%d" % numbers
    end = at + len(data)
    buffer[at:end] = data
    return end


def hex_crc(buffer, length, into, at):
    """Write the CRC-32 of the first `length` bytes of `buffer` as eight lower-case hexadecimal digits at `at` of `into`."""
    into[at : at + 8] = b"%08x" % (binascii.crc32(memoryview(buffer)[:length]) & 0xFFFFFFFF)
