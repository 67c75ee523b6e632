"""CRC-32 (IEEE 802.3) a byte at a time, in two 16-bit halves.

The whole value does not fit a small integer of the board, and the library's function wants the bytes at once and allocates its
result; this one adds a byte as it is sent and touches no heap.
"""

from array import array

_POLYNOMIAL_HIGH = 0xEDB8
_POLYNOMIAL_LOW = 0x8320
_HEX = b"0123456789abcdef"


def _tables():
    high = array("H", bytes(512))
    low = array("H", bytes(512))
    for index in range(256):
        h = 0
        w = index
        for _ in range(8):
            carry = w & 1
            w = w >> 1 | (h & 1) << 15
            h >>= 1
            if carry:
                h ^= _POLYNOMIAL_HIGH
                w ^= _POLYNOMIAL_LOW
        high[index] = h
        low[index] = w
    return high, low


_TABLE_HIGH, _TABLE_LOW = _tables()


class Crc:
    """Running checksum."""

    def __init__(self):
        """Start at the beginning of a line."""
        self._high = 0xFFFF
        self._low = 0xFFFF

    def begin(self):
        """Start anew."""
        self._high = 0xFFFF
        self._low = 0xFFFF

    def add(self, byte):
        """Take one more byte."""
        low = self._low
        high = self._high
        index = (low ^ byte) & 255
        self._low = (low >> 8 | (high & 255) << 8) ^ _TABLE_LOW[index]
        self._high = high >> 8 ^ _TABLE_HIGH[index]

    def hex_into(self, buffer, at):
        """Write the eight lower-case hex digits into `buffer` from `at` on."""
        half = self._high ^ 0xFFFF
        for place in range(4):
            buffer[at + place] = _HEX[half >> (12 - 4 * place) & 15]
        half = self._low ^ 0xFFFF
        for place in range(4):
            buffer[at + 4 + place] = _HEX[half >> (12 - 4 * place) & 15]
