"""The proof that the part is discharged. Doubt fails closed: without the whole chain below, the lid stays locked.

The chain
1. Both witnesses, the divider and the high-voltage detector, below safe for one second with the bleed on.
2. A reason to believe the divider, one of three: during this run it followed the charge; or supply minus 400 kohm times the
   shunt current stayed below safe throughout, so the part never took charge; or the bleed has been on for the worst-case
   time. That time is for the largest energy *and* the largest capacitance the box accepts: 22 kohm x 500 uF x ln(447 V / 30 V)
   is 29.7 s, longer than the 16 s that 50 J at 650 V would need, because the same energy at a lower voltage bleeds slower.
3. The bleed opened for half a second, supply off and seen to be off: still below, so absorption does not bring it back.

Known limits: a part whose lead has let go is seen by neither witness. The account of its charge (stage `nudge` and the
discharge pulse) is what catches that, not this proof.
"""

from .compat import const, ticks_diff

# What the proof asks of the relays
BLEED = const(0)
OPEN = const(1)

_RELAY_MS = const(20)  # both relays made or broken, bounce included


class Proof:
    """Step it every period in which the supply is off; read `proven`."""

    def __init__(self, ratings):
        """Take the box's numbers. Allocates nothing afterwards."""
        self._still_ms = ratings.still_ms
        self._rebound_ms = ratings.rebound_ms
        self._worst_ms = ratings.proof_bleed_ms
        self.proven = False
        self.risen = False  # it came back above safe after having been below for the still time
        self.followed = False
        self.never_charged = False
        self._bleed_ms = 0
        self._below_ms = 0
        self._open_ms = 0
        self._open = False

    def begin(self, now):
        """Begin anew: nothing is proven, the bleed has just been put on. What the run witnessed is kept."""
        self.proven = False
        self.risen = False
        self._bleed_ms = now
        self._below_ms = now
        self._open = False

    def forget(self):
        """Forget what a run witnessed; a new one begins."""
        self.proven = False
        self.followed = False
        self.never_charged = True

    def step(self, now, below, supply_below):
        """Take one period's verdict of both witnesses; return BLEED or OPEN, what the relays are to do."""
        if not below:
            self.risen = self.risen or self._open or self.proven
            self.proven = False
            self._open = False
            self._below_ms = now
            return BLEED
        if self.proven:
            return BLEED
        if self._open:
            return self._watch(now, supply_below)
        still = ticks_diff(now, self._below_ms) >= self._still_ms
        if still and supply_below and self._vouched(now):
            self._open = True
            self._open_ms = now
            return OPEN
        return BLEED

    def _vouched(self, now):
        if self.followed or self.never_charged:
            return True
        return ticks_diff(now, self._bleed_ms) >= self._worst_ms

    def _watch(self, now, supply_below):
        if not supply_below:
            self._open = False
            self._below_ms = now
            return BLEED
        if ticks_diff(now, self._open_ms) >= self._rebound_ms + _RELAY_MS:
            self._open = False
            self.proven = True
            return BLEED
        return OPEN
