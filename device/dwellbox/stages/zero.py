"""Auto-zero: every shunt and full scale read with the supply off and the bleed on. The host takes the rows as offsets.

It comes first, before the part has seen any voltage, so that no absorption current is taken for an offset.
"""

from ..board import FINE
from ..codes import FAULT_LOCK
from ..compat import const
from ..shunts import LEVELS
from ..stage import GO, NEXT, faults

_ZERO_SETTLE_MS = const(100)
_LOCK_WITHIN_MS = const(1000)


class Zero:
    """Every level once, from the most sensitive down, two windows each: one to settle, one to keep."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._level = 0
        self._kept = False

    def begin(self, bench, now):
        """Supply off, both bleeds on."""
        bench.relay(False, False)
        bench.supply.off(now)
        bench.part_scale(FINE, now)
        self._level = len(LEVELS) - 1
        self._kept = False
        bench.read_on(self._level, now)
        bench.front.blank(now, _ZERO_SETTLE_MS)

    def step(self, bench, now):
        """Go down one level each time a settled window has been kept."""
        if not bench.locked and bench.gone(now) > _LOCK_WITHIN_MS:
            return faults(FAULT_LOCK)
        if not bench.window:
            return GO
        if not self._kept:
            self._kept = True
            return GO
        self._kept = False
        self._level -= 1
        if self._level < 0:
            return NEXT if bench.locked else GO
        bench.read_on(self._level, now)
        bench.front.blank(now, _ZERO_SETTLE_MS)
        return GO
