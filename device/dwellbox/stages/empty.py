"""The emptying after the look: through the second bleed alone, first bleed held open, which proves the second."""

from ..board import WIDE
from ..codes import FAULT_SECOND_BLEED
from ..compat import const
from ..stage import GO, NEXT, faults

_EMPTY_SLACK_MS = const(80)
_EMPTY_MV = const(1000)


class Empty:
    """The second bleed alone, then both."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._from_mv = 0
        self._half_ms = 0
        self._proven = False

    def begin(self, bench, now):
        """Supply off, charge relay released, first bleed held open."""
        self._from_mv = bench.front.part_mv
        bench.low(now, WIDE)
        bench.supply.off(now)
        bench.relay(True, False)
        self._proven = False
        # 22 kohm x C x ln 2, half as much again
        kohm = bench.ratings.bleed_ohm // 1000
        self._half_ms = kohm * bench.capacitance_nf // 1000 * 105 // 100 + _EMPTY_SLACK_MS

    def step(self, bench, now):
        """Half the voltage gone in time proves the second bleed; then both, until nearly nothing is left."""
        front = bench.front
        gone = bench.gone(now)
        if not front.part_fresh:
            return GO
        if not self._proven:
            if front.part_mv * 2 <= self._from_mv or front.part_mv < 100:
                self._proven = True
                bench.relay(False, False)
            elif gone > self._half_ms:
                return faults(FAULT_SECOND_BLEED)
            return GO
        if front.part_mv <= _EMPTY_MV and gone > 2 * _EMPTY_SLACK_MS:
            return NEXT
        return faults(FAULT_SECOND_BLEED) if gone > 6 * self._half_ms + 1000 else GO
