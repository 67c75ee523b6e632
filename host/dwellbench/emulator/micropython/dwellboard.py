"""The firmware's board under a desktop MicroPython, in lockstep with the emulated world over two pipes.

Their descriptors' numbers are in the environment.

One exchange a period: outputs and bytes out, readings and bytes in. The bytes of the link travel inside the exchange, so that the
same seed gives the same traffic. Ticks wrap at 2**30 as on the board. Other words (flash, scratch) are exchanges of their own.
"""

import os
import struct

from dwellbox.board import Board

_OUT_ROOM = 64
_ASK = (
    "<BBiBBbbBB"  # kind, outputs, supply_mv, pumps, feeds, conversion 0, conversion 1, bytes out, bytes taken
)
_ASK_SIZE = struct.calcsize(_ASK)
_REPLY_SIZE = 12  # now_ms u32, inputs u8, codes 2 x i16, room u8, bytes in u8, which codes are none u8


class PipeBoard(Board):
    """Holds a period's calls until `wait_period` exchanges them. Nothing there allocates."""

    def __init__(self):
        self._in = open(int(os.getenv("DWELLBOARD_IN")), "rb")
        self._to = open(int(os.getenv("DWELLBOARD_OUT")), "wb")
        self._ask = bytearray(_ASK_SIZE + _OUT_ROOM)
        self._asked = memoryview(self._ask)
        self._reply = bytearray(_REPLY_SIZE)
        self._bytes = bytearray(64)
        self._views = [memoryview(self._bytes)[:n] for n in range(65)]
        self._asks = [memoryview(self._ask)[: _ASK_SIZE + n] for n in range(_OUT_ROOM + 1)]
        self._bits = 0
        self._mv = 0
        self._pumps = 0
        self._feeds = 0
        self._conversion = [-1, -1]
        self._codes = [40000, 40000]
        self._now = 0
        self._inputs = 0
        self._room = 0
        self._out = 0
        self._got = 0
        self._at = 0
        about = self._word(b"H", "", b"").decode().split(" ")
        self._cause = int(about[0])
        self._id = about[1]
        self._build = about[2]
        self.emulation = {"time_scale": about[3]}
        self._take()

    def wait_period(self):
        conversion = self._conversion
        ask = self._ask
        ask[0] = 80  # P
        ask[1] = self._bits
        mv = self._mv
        ask[2] = mv & 255
        ask[3] = mv >> 8 & 255
        ask[4] = mv >> 16 & 255
        ask[5] = 0
        ask[6] = self._pumps
        ask[7] = self._feeds
        ask[8] = conversion[0] & 255
        ask[9] = conversion[1] & 255
        ask[10] = self._out
        ask[11] = self._at
        self._to.write(self._asks[self._out])
        self._pumps = 0
        self._feeds = 0
        conversion[0] = -1
        conversion[1] = -1
        self._out = 0
        self._take()

    def _take(self):
        reply = self._reply
        if self._in.readinto(reply) != _REPLY_SIZE:
            raise SystemExit  # the world has ended
        self._now = reply[0] | reply[1] << 8 | reply[2] << 16 | reply[3] << 24
        self._inputs = reply[4]
        none = reply[11]
        self._codes[0] = 40000 if none & 1 else _short(reply, 5)
        self._codes[1] = 40000 if none & 2 else _short(reply, 7)
        self._room = reply[9]
        self._got = reply[10]
        self._at = 0
        if self._got:
            self._in.readinto(self._views[self._got])

    def now_ms(self):
        return self._now

    def inputs(self):
        return self._inputs

    def convert(self, unit, channel, full_scale):
        self._conversion[unit] = channel * 2 + full_scale

    def code(self, unit):
        return self._codes[unit]

    def outputs(self, bits):
        self._bits = bits

    def supply_mv(self, mv):
        self._mv = mv

    def pump(self):
        self._pumps += 1

    def feed(self):
        self._feeds += 1

    def get(self):
        at = self._at
        if at >= self._got:
            return -1
        self._at = at + 1
        return self._bytes[at]

    def room(self):
        return self._room

    def put(self, byte):
        self._ask[_ASK_SIZE + self._out] = byte
        self._out += 1
        self._room -= 1

    def keep(self, name, data):
        """Time passes in it, as it does on a board that erases flash."""
        now = self._word(b"K", name, data)
        self._now = now[0] | now[1] << 8 | now[2] << 16 | now[3] << 24
        self._inputs = now[4]

    def kept(self, name):
        data = self._word(b"G", name, b"")
        return data[1:] if data[0:1] == b"+" else None

    def scratch(self):
        return int(self._word(b"S", "", b""))

    def set_scratch(self, value):
        self._word(b"T", "", str(value).encode())

    def cause(self):
        return self._cause

    def unique_id(self):
        return self._id

    def build(self):
        return self._build

    def wants_plain(self):
        return False

    def restart_plain(self):
        self.wait_period()  # what was put in this period still goes out
        self._word(b"X", "", b"")
        raise SystemExit

    def _word(self, kind, name, data):
        """Exchange something rare; allocates."""
        self._to.write(kind + struct.pack("<BH", len(name), len(data)) + name.encode() + data)
        size = self._in.read(2)
        if len(size) != 2:
            raise SystemExit
        length = size[0] | size[1] << 8
        return self._in.read(length) if length else b""


def _short(buffer, at):
    value = buffer[at] | buffer[at + 1] << 8
    return value - 65536 if value & 0x8000 else value


def make_board():
    """Return the board of this emulation."""
    return PipeBoard()
