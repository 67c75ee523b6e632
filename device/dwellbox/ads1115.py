"""Driver of the ADS1115, a 16-bit converter on I2C. Register words and full scales from its data sheet (TI SBAS444E).

The bus is handed in. The chip is asked for its configuration when the driver is made, so a missing one is known at once. One
conversion is started and read per call, single-shot, at 250 samples/s: 4 ms, +/-10 % as the data sheet allows, which fits the
5 ms period with 0.6 ms to spare. Every transfer is bounded by the bus's own timeout. Nothing allocates after `__init__`.
"""

from .compat import const

_CONVERSION = const(0)
_CONFIG = const(1)

_OS = const(0x8000)  # write: start a conversion; read: 1 when idle
_SINGLE = const(0x0100)
_RATE_250 = const(0x00A0)  # DR code 101
_NO_COMPARATOR = const(0x0003)
_GROUND = const(0x4000)  # MUX 1xx: AINx against ground
_PGA = (0x0600, 0x0A00)  # +/-1.024 V, +/-0.256 V

RESET_WORD = const(0x8583)  # configuration after power-up, from the bits' reset values


class Silent(Exception):
    """The chip does not answer."""


class ADS1115:
    """One converter at `address` on `bus`."""

    def __init__(self, bus, address):
        """Take the bus; raise Silent if no chip answers there."""
        self._bus = bus
        self._address = address
        self._word = bytearray(2)
        self._started = False
        self._wanted = 0
        if self._read(_CONFIG) < 0:
            raise Silent(address)

    def _read(self, register):
        """Return a register's 16 bits, or -1 when the chip does not answer."""
        try:
            self._bus.readfrom_mem_into(self._address, register, self._word)
        except OSError:
            return -1
        return self._word[0] << 8 | self._word[1]

    def start(self, pin, full_scale):
        """Start a conversion of AIN`pin` (0 to 3) against ground at full scale 0 (1.024 V) or 1 (0.256 V)."""
        config = _OS | _GROUND | pin << 12 | _PGA[full_scale] | _SINGLE | _RATE_250 | _NO_COMPARATOR
        self._wanted = config & 0x7FFF
        self._word[0] = config >> 8
        self._word[1] = config & 255
        try:
            self._bus.writeto_mem(self._address, _CONFIG, self._word)
        except OSError:
            self._started = False
            return
        self._started = True

    def code(self, none):
        """Return the code of the conversion started last; `none` if it is not done, not as asked, or the chip is silent.

        The configuration is read back first: a chip that was reset by a dip, or that answers for another, has another word.
        """
        if not self._started:
            return none
        config = self._read(_CONFIG)
        if config < 0 or not config & _OS or config & 0x7FFF != self._wanted:
            return none
        value = self._read(_CONVERSION)
        if value < 0:
            return none
        return value - 65536 if value & 0x8000 else value
