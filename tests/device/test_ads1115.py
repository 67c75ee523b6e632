"""The converter's driver against a bus that enforces the data sheet (TI SBAS444E): registers, words, timing, silence."""

import pytest

from dwellbox.ads1115 import ADS1115, RESET_WORD, Silent

NONE = 40000
# Data sheet: full scale by PGA code, conversions a second by DR code.
FULL_SCALE_V = {0: 6.144, 1: 4.096, 2: 2.048, 3: 1.024, 4: 0.512, 5: 0.256, 6: 0.256, 7: 0.256}
RATE = {0: 8, 1: 16, 2: 32, 3: 64, 4: 128, 5: 250, 6: 475, 7: 860}


class Bus:
    """An I2C bus with one chip: single-shot conversions take 1/rate, stretched by the oscillator's error."""

    def __init__(self, address: int = 0x48, oscillator: float = 1.0) -> None:
        self.address = address
        self.oscillator = oscillator
        self.config = 0x8583
        self.conversion = 0
        self.volts = [0.0, 0.0, 0.0, 0.0]
        self.now_s = 0.0
        self.ready_s = 0.0
        self.held = False
        self.pending = 0

    def _check(self, address: int, register: int) -> None:
        if self.held or address != self.address:
            raise OSError(5)
        assert register in (0, 1, 2, 3), "the chip has four registers"

    def readfrom_mem_into(self, address: int, register: int, into: bytearray) -> None:
        self._check(address, register)
        assert len(into) == 2
        if self.now_s >= self.ready_s and not self.config & 0x8000:
            self.config |= 0x8000
            self.conversion = self.pending
        value = (self.conversion, self.config)[register]
        into[0], into[1] = value >> 8 & 255, value & 255

    def writeto_mem(self, address: int, register: int, data: bytes) -> None:
        self._check(address, register)
        assert register == 1, "only the configuration is written"
        word = data[0] << 8 | data[1]
        assert word & 0x0100, "single-shot: the mode bit is set"
        assert word & 0x8000, "a conversion is asked for"
        assert word & 0x0003 == 3, "the comparator is off"
        self.config = word & 0x7FFF
        mux = word >> 12 & 7
        assert mux >= 4, "single-ended inputs"
        full = FULL_SCALE_V[word >> 9 & 7]
        code = round(self.volts[mux - 4] / full * 32768)
        self.pending = max(-32768, min(32767, code)) & 0xFFFF
        self.ready_s = self.now_s + 1 / RATE[word >> 5 & 7] * self.oscillator + 25e-6


def test_reset_word_is_the_data_sheets() -> None:
    assert RESET_WORD == 0x8583


@pytest.mark.parametrize(
    ("pin", "full_scale", "volts", "code"),
    [
        (0, 0, 0.5, 16000),
        (0, 1, 0.125, 16000),
        (3, 0, -0.5, -16000),
        (1, 0, 2.0, 32767),  # clips at 7FFF
        (2, 1, -1.0, -32768),  # and at 8000
        (0, 0, 31.25e-6, 1),  # one step at +/-1.024 V
        (0, 1, 7.8125e-6, 1),  # one step at +/-0.256 V
    ],
)
def test_codes(pin: int, full_scale: int, volts: float, code: int) -> None:
    bus = Bus()
    chip = ADS1115(bus, 0x48)
    bus.volts[pin] = volts
    chip.start(pin, full_scale)
    bus.now_s += 0.005
    assert chip.code(NONE) == code


@pytest.mark.parametrize("oscillator", [0.9, 1.0, 1.1])
def test_a_conversion_fits_the_period_with_the_slowest_oscillator(oscillator: float) -> None:
    bus = Bus(oscillator=oscillator)
    chip = ADS1115(bus, 0x48)
    chip.start(0, 0)
    bus.now_s += 0.003
    assert chip.code(NONE) == NONE, "not done yet is not a reading"
    bus.now_s += 0.002
    assert chip.code(NONE) == 0


def test_a_missing_chip_is_known_at_once() -> None:
    with pytest.raises(Silent):
        ADS1115(Bus(address=0x49), 0x48)


def test_a_bus_that_is_held_gives_no_reading_and_raises_nothing() -> None:
    bus = Bus()
    chip = ADS1115(bus, 0x48)
    bus.held = True
    chip.start(0, 0)
    bus.now_s += 0.005
    assert chip.code(NONE) == NONE
    bus.held = False
    chip.start(0, 0)
    bus.now_s += 0.005
    assert chip.code(NONE) == 0


def test_a_chip_that_was_reset_meanwhile_gives_no_reading() -> None:
    bus = Bus()
    chip = ADS1115(bus, 0x48)
    chip.start(0, 0)
    bus.config = RESET_WORD
    bus.now_s += 0.005
    assert chip.code(NONE) == NONE
