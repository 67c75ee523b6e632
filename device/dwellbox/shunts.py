"""Which shunt and which full scale a current is read on.

Rules, with their reasons
* The low shunt before any charge, bleed or change of voltage: 650 V into a short must not clip, and the bleed pulls
  milliamperes through the node.
* A shunt R settles with (R + Rc) C. 1 Mohm is right in time only up to 1 uF, 100 kohm up to 10 uF; above, the charge path
  itself rules and the low shunt stays.
* A step up only when the current is below 60 % of the next full scale, and only when what is left of the charge is invisible:
  twelve time constants, or the reading flat for half a second after seven. A step taken at "within half a per cent" reads a
  good part several times too leaky.
* After a step the reading is blanked for 7 (R + Rc) C: a leak builds up slowly behind a high shunt and reads low until then,
  which would be a false accept.
* A clipped reading in two periods running goes straight back to the low shunt.
"""

from .board import FINE, WIDE
from .compat import const

# (shunt, full scale) from the least to the most sensitive
LEVELS = ((0, WIDE), (0, FINE), (1, WIDE), (1, FINE), (2, WIDE), (2, FINE))
LOW_WIDE = const(0)
LOW_FINE = const(1)

_MID_NF = const(10000)
_HIGH_NF = const(1000)
_SHARE = const(60)  # per cent of full scale
_EASE_MS = const(100)  # a change of full scale alone: one window


class Shunts:
    """Levels, their full scales and settling times for this box."""

    def __init__(self, ratings):
        """Take the box's numbers. Allocates nothing afterwards."""
        self._ohm = ratings.shunts_ohm
        self._charge_ohm = ratings.charge_ohm
        full = []
        for shunt, fine in LEVELS:
            full.append(ratings.ranges_mv[fine] * 1000000 // ratings.shunts_ohm[shunt])
        self.full_na = tuple(full)

    def finest(self, current_na, capacitance_nf):
        """Return the most sensitive level that reads `current_na` with room and settles with this capacitance."""
        last = 5
        if capacitance_nf > _MID_NF:
            last = 1
        elif capacitance_nf > _HIGH_NF:
            last = 3
        level = LOW_WIDE
        for k in range(1, last + 1):
            if current_na * 100 < self.full_na[k] * _SHARE:
                level = k
        return level

    def blank_ms(self, before, after, capacitance_nf):
        """Return how long readings are unsettled after a step from one level to another."""
        shunt = LEVELS[after][0]
        if LEVELS[before][0] == shunt:
            return _EASE_MS
        kohm = (self._ohm[shunt] + self._charge_ohm) // 1000
        return _EASE_MS + 7 * kohm * capacitance_nf // 1000
