"""The reference board: Raspberry Pi Pico class, two ADS1115 on I2C 0, relays by transistor drivers, link over USB serial.

Pins, active high, each with a pull-down at the driver so that a pin that floats at reset is at rest:

    GP2  bleed relay coil (opens the first bleed)     GP8  lid switch A (closed: high)
    GP3  charge relay coil                            GP9  lid switch B (closed: low)
    GP4  I2C 0 SDA   GP5  I2C 0 SCL                   GP10 stop button (normally-closed contact: pressed or broken is high)
    GP6  mid shunt coil                               GP11 high-voltage detector
    GP7  low shunt out coil                           GP12 lid lock bolt (in: high)
    GP13 lid lock release                             GP14 buzzer
    GP15 supply setting, PWM at 20 kHz, filtered      GP16 supply enable pump

What calls cost: I2C at 400 kHz, about 0.1 ms a register; two converters, four reads and two writes a period are 0.7 ms.
A write to the USB link is made only after `poll` says there is room, a byte at a time: it must never block.
"""

import select
import sys
import time

import machine
import micropython

from .ads1115 import ADS1115, Silent
from .board import CAUSE_POWER, CAUSE_RESET, NO_CODE, Board
from .codes import (
    IN_HV,
    IN_LID_A,
    IN_LID_B,
    IN_LOCKED,
    IN_STOP,
    OUT_BLEED_OPEN,
    OUT_CHARGE,
    OUT_LOW_OPEN,
    OUT_MID_SHUNT,
    OUT_NOTICE,
    OUT_RELEASE,
)
from .compat import const

_OUTPUTS = (
    (OUT_BLEED_OPEN, 2),
    (OUT_CHARGE, 3),
    (OUT_MID_SHUNT, 6),
    (OUT_LOW_OPEN, 7),
    (OUT_RELEASE, 13),
    (OUT_NOTICE, 14),
)
_INPUTS = ((IN_LID_A, 8), (IN_LID_B, 9), (IN_STOP, 10), (IN_HV, 11), (IN_LOCKED, 12))
_SUPPLY = const(15)
_PUMP = const(16)
_ADDRESS_A = const(0x48)  # ADDR to ground
_ADDRESS_B = const(0x49)  # ADDR to VDD
_AIN = (
    0,
    1,
    2,
    3,
    0,
    1,
)  # converter input by channel code: part, supply, thermistor, reference a | shunt, reference b
_PERIOD_MS = const(5)
_WATCHDOG_MS = const(2000)
_SCRATCH = const(0x4005800C)  # watchdog scratch register 0: survives a reset, not a power cut
_SCRATCH_MARK = const(0x5D000000)  # the upper byte says that the number below it is ours


class BoardRp2(Board):
    """The reference board's hardware behind the seam."""

    def __init__(self):
        """Set every output to its safe level, before anything else."""
        self._out = []
        for bit, pin in _OUTPUTS:
            self._out.append((bit, machine.Pin(pin, machine.Pin.OUT, value=0)))
        self._pump = machine.Pin(_PUMP, machine.Pin.OUT, value=0)
        self._pwm = machine.PWM(machine.Pin(_SUPPLY), freq=20000, duty_u16=0)
        self._in = []
        for bit, pin in _INPUTS:
            self._in.append((bit, machine.Pin(pin, machine.Pin.IN)))
        self._bits = 0
        self._mv = 0
        self._bus = machine.I2C(0, sda=machine.Pin(4), scl=machine.Pin(5), freq=400000, timeout=2000)
        self._chips = [_chip(self._bus, _ADDRESS_A), _chip(self._bus, _ADDRESS_B)]
        self._poll = select.poll()
        self._poll.register(sys.stdin, select.POLLIN)
        self._room = select.poll()
        self._room.register(sys.stdout, select.POLLOUT)
        self._read = sys.stdin.buffer.readinto
        self._write = sys.stdout.buffer.write
        self._byte_in = bytearray(1)
        self._byte_out = bytearray(1)
        self._next_ms = time.ticks_ms()
        self._watchdog = None
        micropython.kbd_intr(-1)  # 0x03 is a byte like another

    def now_ms(self):
        """Return the millisecond count."""
        return time.ticks_ms()

    def wait_period(self):
        """Sleep until the next tick; after a late period go on from now, so that lateness does not add up."""
        self._next_ms = time.ticks_add(self._next_ms, _PERIOD_MS)
        left = time.ticks_diff(self._next_ms, time.ticks_ms())
        if left > 0:
            time.sleep_ms(left)
        elif left < -_PERIOD_MS:
            self._next_ms = time.ticks_ms()

    def inputs(self):
        """Return the input levels."""
        bits = 0
        for bit, pin in self._in:
            if pin.value():
                bits |= bit
        return bits

    def convert(self, unit, channel, full_scale):
        """Start a conversion."""
        chip = self._chips[unit]
        if chip is not None:
            chip.start(_AIN[channel], full_scale)

    def code(self, unit):
        """Return the last conversion's code. A converter that was missing at the start stays missing."""
        chip = self._chips[unit]
        return NO_CODE if chip is None else chip.code(NO_CODE)

    def outputs(self, bits):
        """Set the coils that changed."""
        if bits == self._bits:
            return
        for bit, pin in self._out:
            pin.value(1 if bits & bit else 0)
        self._bits = bits

    def supply_mv(self, mv):
        """Set the supply."""
        if mv != self._mv:
            centivolts = mv // 10
            self._pwm.duty_u16(centivolts + centivolts * 535 // 65000)  # 650 V is 65535, in small integers
            self._mv = mv

    def pump(self):
        """Toggle the enable."""
        self._pump.value(not self._pump.value())

    def feed(self):
        """Feed the watchdog; the first time starts it, for it cannot be stopped again."""
        if self._watchdog is None:
            self._watchdog = machine.WDT(timeout=_WATCHDOG_MS)
        self._watchdog.feed()

    def get(self):
        """Return the next byte from USB, or -1."""
        for _ in self._poll.ipoll(0):  # ipoll touches no heap, poll makes a list each time
            self._read(self._byte_in)
            return self._byte_in[0]
        return -1

    def room(self):
        """Return 1 when a byte can be sent without waiting."""
        for _ in self._room.ipoll(0):
            return 1
        return 0

    def put(self, byte):
        """Send one byte."""
        self._byte_out[0] = byte
        self._write(self._byte_out)

    def keep(self, name, data):
        """Write a file whole, then rename it over the old one, so that a power cut leaves one or the other."""
        import os

        path = "/" + name + ".kept"
        with open(path + ".new", "wb") as file:
            file.write(data)
        os.rename(path + ".new", path)

    def kept(self, name):
        """Return a kept file's bytes, or None."""
        try:
            with open("/" + name + ".kept", "rb") as file:
                return file.read()
        except OSError:
            return None

    def scratch(self):
        """Return the scratch number, 0 if the power was cut."""
        value = machine.mem32[_SCRATCH]
        return value & 0xFFFFFF if value & 0x7F000000 == _SCRATCH_MARK else 0

    def set_scratch(self, value):
        """Set the scratch number."""
        machine.mem32[_SCRATCH] = _SCRATCH_MARK | value

    def cause(self):
        """Say why the controller started."""
        return CAUSE_POWER if machine.reset_cause() == machine.PWRON_RESET else CAUSE_RESET

    def unique_id(self):
        """Return the chip's number."""
        return "".join(["%02x" % byte for byte in machine.unique_id()])

    def build(self):
        """Return the hash that the loader left beside the firmware, or zeros."""
        try:
            with open("/build.txt") as file:
                return file.read(8)
        except OSError:
            return "00000000"

    def restart_plain(self):
        """Leave a note for the next start and reset: the watchdog cannot be stopped, so only a reset is free of it."""
        self.keep("plain", b"1")
        machine.reset()

    def wants_plain(self):
        """Say, once, whether the last start asked for the plain interpreter."""
        if self.kept("plain") != b"1":
            return False
        self.keep("plain", b"0")
        return True


def _chip(bus, address):
    try:
        return ADS1115(bus, address)
    except Silent:
        return None


def make_board():
    """Return the board, every output at its safe level."""
    return BoardRp2()
