"""The grammar of a number (RFC 8259, section 6) as a table: from what has come, by the next byte, to what has come then."""

from .compat import const

# What has come of a number.
ZERO = const(1)
INT = const(2)
POINT = const(3)
FRACTION = const(4)
EXPONENT = const(5)
SIGN = const(6)
POWER = const(7)
KINDS = const(7)

# 0: not allowed
_NEXT = (
    # other, 0, 1 to 9, point, e, plus, minus
    (0, ZERO, INT, 0, 0, 0, 0),  # nothing, or the minus before it
    (0, 0, 0, POINT, EXPONENT, 0, 0),  # ZERO
    (0, INT, INT, POINT, EXPONENT, 0, 0),  # INT
    (0, FRACTION, FRACTION, 0, 0, 0, 0),  # POINT
    (0, FRACTION, FRACTION, 0, EXPONENT, 0, 0),  # FRACTION
    (0, POWER, POWER, 0, 0, SIGN, SIGN),  # EXPONENT
    (0, POWER, POWER, 0, 0, 0, 0),  # SIGN
    (0, POWER, POWER, 0, 0, 0, 0),  # POWER
)
GRAMMAR = bytes([after for row in _NEXT for after in row])
KIND = bytearray(256)
for _kind, _bytes in enumerate((b"", b"0", b"123456789", b".", b"eE", b"+", b"-")):
    for _byte in _bytes:
        KIND[_byte] = _kind
