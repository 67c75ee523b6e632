"""Discharge: supply off, both bleeds on, and the voltage must fall as the bleeds and the capacitance say.

Two accounts are taken on the way down, for every run that put more than 45 uC on the part, however it ended
* the charge must be seen to leave: the bleed pulls milliamperes through the low node, which drives the shunt's converter to
  its negative end for at least one reading in the first periods. A lead that let go shows nothing.
* the fall must not be slower than one and a half times both bleeds' time constant.
"""

from ..board import WIDE
from ..codes import FAULT_BLEED_SLOW, FAULT_CHARGE_LEFT
from ..compat import const
from ..stage import GO, NEXT, faults
from .nudge import stored_nc

_PULSE_MS = const(60)  # relays 10 ms, bounce, one period of reading: the pulse is over or begun by then
_PULSE_CODE = const(-8000)  # a quarter of full scale, negative
_SLACK_MS = const(300)


class Bleed:
    """Both bleeds until both witnesses are below safe and the bleed time asked for is over."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._owed = False
        self._seen = False
        self._most_ms = 0

    def begin(self, bench, now):
        """Supply off, everything at rest, low shunt."""
        self._owed = stored_nc(bench) > bench.ratings.nudge_above_nc
        self._seen = False
        self._most_ms = self._limit_ms(bench)
        bench.flags = 0
        bench.supply.off(now)
        bench.relay(False, False)
        bench.low(now, WIDE)
        bench.part_scale(WIDE, now)

    def step(self, bench, now):
        """Watch the pulse and the fall."""
        front = bench.front
        if front.shunt_code < _PULSE_CODE:
            self._seen = True
        gone = bench.gone(now)
        if self._owed and not self._seen and gone > _PULSE_MS:
            return faults(FAULT_CHARGE_LEFT)
        if not bench.below:
            return faults(FAULT_BLEED_SLOW) if gone > self._most_ms else GO
        return NEXT if gone >= bench.bleed_ms else GO

    def _limit_ms(self, bench):
        """Return when both bleeds must have brought the part below safe, half as much again."""
        ratings = bench.ratings
        nf = bench.capacitance_nf
        if not nf:
            return ratings.proof_bleed_ms
        tau = ratings.bleed_ohm // 2000 * nf // 1000
        # ln(V / 30 V) by halvings: each is 0.69 of a time constant
        halvings = 1
        mv = bench.front.part_mv
        while mv > ratings.safe_mv:
            mv //= 2
            halvings += 1
        return tau * halvings * 105 // 100 + _SLACK_MS
