"""The front end: two converters, their slots, and the 100 ms windows that go into the ring.

Each converter gives one code a period: the result of the conversion that was started in the period before. The part's
voltage and the shunt are read at the same time, on one converter each. In every window the first converter lends one slot
to the supply and one to the thermistor or its reference, placed so that the mean of the others is still centred on the
window. The second lends one slot a second to its reference, outside the stages that count charge. A converter that hangs
with an old code therefore fails its reference, and one that does not answer gives no code at all.

Nothing here allocates once the object is made; readings are whole numbers (mV, nA) for the sequence, while the window
keeps the raw codes for the host. The scales here are nominal: a calibration never reaches the firmware.
"""

from .board import NO_CODE, WIDE
from .codes import (
    CH_PART,
    CH_REFERENCE_A,
    CH_REFERENCE_B,
    CH_SHUNT,
    CH_SUPPLY,
    CH_THERMISTOR,
    FLAG_SHORT_WINDOW,
    FLAG_UNSETTLED,
    FLAG_V_CLIPPED,
)
from .compat import const, ticks_diff

_SUPPLY_SLOT = const(5)  # (5 + 14) / 2 is the middle of 0 to 19: the mean of a ramp keeps its centre
_OTHER_SLOT = const(14)
_REFERENCE_EVERY = const(10)  # windows between two looks at the second converter's reference
_FULL = const(32767)
_TOP = const(32760)  # a reading this near to full scale has clipped
_LOW = const(-32760)
_LEAST = const(32767)
_MOST = const(-32768)


class Front:
    """Readings of this period and of the last full window."""

    def __init__(self, board, ratings):
        """Take the board and the box's numbers. Allocates nothing afterwards."""
        self.board = board
        self.window_ms = ratings.window_ms
        ratio = ratings.divider_ratio
        wide, fine = ratings.ranges_mv
        # microvolt a code, divider included; at 32767 codes the product stays inside a 31-bit small integer
        self._part_uv = (wide * 1000 * ratio // 32768, fine * 1000 * ratio // 32768)
        # hundredths of a picoampere a code by shunt and full scale; on the low shunt tenths of a nanoampere
        self._pa100 = []
        for ohm in ratings.shunts_ohm:
            self._pa100.append(wide * 100000000 // 32768 * 1000 // ohm)
            self._pa100.append(fine * 100000000 // 32768 * 1000 // ohm)
        self._low_na10 = (self._pa100[0] // 10000, self._pa100[1] // 10000)
        self._reference = ratings.reference_mv * 32768 // wide
        self._reference_off = self._reference // 20
        # this period
        self.part_mv = 0
        self.part_fresh = False
        self.part_clipped = False
        self.supply_mv = 0
        self.supply_fresh = False
        self.shunt_code = 0
        self.shunt_fresh = False
        self.temp_code = 0
        self.silent = 0  # periods in a row without an answer from either converter
        self.stuck = 0  # bits: a converter did not read its reference
        # selection for the next conversions
        self.shunt = 0
        self.fine = WIDE
        self.part_fine = WIDE
        self.counting = False  # charge is being counted: the shunt's converter lends no slot
        # the last full window
        self.edge = False
        self.whole = False
        self.mean_part_mv = 0
        self.mean_code10 = 0  # mean shunt code in tenths
        self.peak_code = 0  # largest magnitude
        self.clipped = 0
        self._channel0 = CH_PART
        self._channel1 = CH_SHUNT
        self._slot = 0
        self._window = 0
        self._count = 0
        self._start_ms = 0
        self._settled_ms = 0
        self._blank = False
        self._supply_code = 0
        self._clear()

    def _clear(self):
        self._nv = 0
        self._sv = 0
        self._vmin = _LEAST
        self._vmax = _MOST
        self._ni = 0
        self._si = 0
        self._imin = _LEAST
        self._imax = _MOST
        self._iclip = 0
        self._vclip = False

    def take(self, now):
        """Read what the conversions of the last period gave."""
        board = self.board
        code0 = board.code(0)
        code1 = board.code(1)
        self.part_fresh = False
        self.supply_fresh = False
        self.shunt_fresh = False
        if code0 == NO_CODE or code1 == NO_CODE:
            self.silent += 1
        else:
            self.silent = 0
        if code0 != NO_CODE:
            channel = self._channel0
            if channel == CH_PART:
                self.part_mv = code0 * self._part_uv[self.part_fine] // 1000
                self.part_fresh = True
                self.part_clipped = code0 >= _TOP
                self._nv += 1
                self._sv += code0
                if code0 < self._vmin:
                    self._vmin = code0
                if code0 > self._vmax:
                    self._vmax = code0
            else:
                self._other(channel, code0)
        if code1 != NO_CODE:
            if self._channel1 == CH_SHUNT:
                self.shunt_code = code1
                self.shunt_fresh = True
                self._ni += 1
                self._si += code1
                if code1 < self._imin:
                    self._imin = code1
                if code1 > self._imax:
                    self._imax = code1
                if code1 >= _TOP or code1 <= _LOW:
                    self._iclip += 1
            else:
                self._other(self._channel1, code1)
        self.edge = ticks_diff(now, self._start_ms) >= self.window_ms

    def _other(self, channel, code):
        if channel == CH_SUPPLY:
            self._supply_code = code
            self.supply_mv = code * self._part_uv[WIDE] // 1000
            self.supply_fresh = True
        elif channel == CH_THERMISTOR:
            self.temp_code = code
        elif channel == CH_REFERENCE_A or channel == CH_REFERENCE_B:
            off = code - self._reference
            mask = 1 if channel == CH_REFERENCE_A else 2
            if off > self._reference_off or off < -self._reference_off:
                self.stuck |= mask
            else:
                self.stuck &= ~mask

    def start(self):
        """Start the next period's conversions."""
        channel = CH_PART
        slot = self._slot
        if slot == _SUPPLY_SLOT:
            channel = CH_SUPPLY
        elif slot == _OTHER_SLOT:
            channel = CH_THERMISTOR if self._window & 1 else CH_REFERENCE_A
        self._channel0 = channel
        self.board.convert(0, channel, self.part_fine if channel == CH_PART else WIDE)
        channel = CH_SHUNT
        if slot == _OTHER_SLOT and not self.counting and self._window % _REFERENCE_EVERY == 0:
            channel = CH_REFERENCE_B
        self._channel1 = channel
        self.board.convert(1, channel, self.fine if channel == CH_SHUNT else WIDE)
        self._slot = slot + 1

    def select(self, shunt, fine, now, settle_ms):
        """Choose shunt and full scale of the next conversions; readings count as unsettled for `settle_ms`."""
        self.shunt = shunt
        self.fine = fine
        self.blank(now, settle_ms)

    def blank(self, now, settle_ms):
        """Count the readings as unsettled for `settle_ms` from now on."""
        self._settled_ms = (now + settle_ms) & 0x3FFFFFFF
        self._blank = True

    def settled(self, now):
        """Say whether the blanking after a change is over."""
        if self._blank and ticks_diff(now, self._settled_ms) >= 0:
            self._blank = False
        return not self._blank

    def close(self, now, ring, t, stage, flags):
        """End the window: keep its means, put its row into `ring` (None: keep nothing), begin the next one."""
        nv = self._nv
        ni = self._ni
        self.whole = ni > 0 and nv > 0 and ticks_diff(now, self._start_ms) >= self.window_ms
        if nv:
            self.mean_part_mv = self._sv // nv * self._part_uv[self.part_fine] // 1000
        if ni:
            self.mean_code10 = self._si * 10 // ni
            self.peak_code = self._imax if self._imax > -self._imin else -self._imin
            self.clipped = self._iclip
        if ring is not None and (nv or ni):
            if self._blank and ticks_diff(self._start_ms, self._settled_ms) < 0:
                flags |= FLAG_UNSETTLED
            if not self.whole:
                flags |= FLAG_SHORT_WINDOW
            if nv and (self._vmax >= _TOP or self._vmin <= _LOW):
                flags |= FLAG_V_CLIPPED
            ring.sample(
                t,
                stage,
                self.shunt,
                self.fine,
                nv,
                self._sv,
                self._vmin if nv else 0,
                self._vmax if nv else 0,
                ni,
                self._si,
                self._imin if ni else 0,
                self._imax if ni else 0,
                self._iclip,
                self._supply_code,
                self.temp_code,
                flags,
                self.part_fine,
            )
        self.settled(now)
        self._start_ms = now
        self._slot = 0
        self._window = (self._window + 1) % 1000
        self.edge = False
        self._clear()

    def na(self, code):
        """Return a shunt code as nanoamperes (whole)."""
        if self.shunt == 0:
            return code * self._low_na10[self.fine] // 10
        return self.pa(code) // 1000

    def pa(self, code):
        """Return a shunt code as picoamperes; on the low shunt allocates above 1 mA."""
        return code * self._pa100[self.shunt * 2 + self.fine] // 100

    def full_na(self):
        """Return the present full scale in nanoamperes."""
        return self.na(_FULL)
