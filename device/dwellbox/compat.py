"""What MicroPython and CPython do not share, in one place."""

try:
    from micropython import const
except ImportError:

    def const(value):
        """Return the value; MicroPython's compiler folds it in."""
        return value


# The inner loops of the wire: in machine code where the interpreter makes it (the board does), else through its library.
try:
    from .native import hex_crc, put_bytes, put_number, put_row
except (ImportError, SyntaxError, ValueError):
    # no MicroPython; no machine code for this processor; compiled for another one
    from .plain import hex_crc, put_bytes, put_number, put_row  # noqa: F401


# Milliseconds count from 0 to 2**30 - 1 and wrap (12.4 days). The arithmetic below stays inside a 31-bit small integer, so it
# allocates nothing on the board; the port's own ticks_diff has another period on a desktop build.


def ticks_diff(later, earlier):
    """Return later - earlier in milliseconds, right across the wrap up to half a period (6.2 days) either way."""
    difference = (later - earlier) & 0x3FFFFFFF
    return difference if difference < 0x20000000 else difference - 0x40000000


def ticks_add(ticks, milliseconds):
    """Return the count `milliseconds` later, wrapped."""
    return (ticks + milliseconds) & 0x3FFFFFFF
