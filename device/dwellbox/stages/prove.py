"""The way down, proven at a voltage that hurts nobody, before every run.

Charge relay pulled, first bleed at rest, 100 V on the supply. By Kirchhoff what comes through the charge resistors and does
not go through the shunt goes through the bleed, so the node must read that current times 22 kohm. This proves charge path,
first bleed and divider at 5.2 V with any part in place, even while a large one still charges. A node that stays down while
the shunt sees the whole current is a short, which is a result and not a fault: the part never took charge.
"""

from ..board import FINE
from ..codes import END_REVERSED, END_SHORT, FAULT_WAY_DOWN
from ..compat import const, ticks_diff
from ..stage import GO, NEXT, POLAR_STALL_MV, ends, faults

_PROVE_FIRST_MS = const(250)  # relay, slew and one reading of the supply
_PROVE_STALL_MS = const(3000)
_PROVE_MOST_MS = const(60000)
_PROVE_MV = const(2500)  # enough of the 5.2 V for ten per cent
_PROVE_RISE_MV = const(150)  # in the last second; 500 uF rises 500 mV
_PROVE_HIGH_MV = const(15000)


class Prove:
    """The first bleed, the charge path and the divider, at a voltage that hurts nobody."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._good = 0
        self._mark_mv = 0
        self._mark_ms = 0

    def begin(self, bench, now):
        """100 V through the charge path onto the part and the first bleed."""
        bench.low(now, FINE)
        bench.relay(False, True)
        bench.supply.set(bench.ratings.prove_mv, now)
        self._good = 0
        self._mark_mv = 0
        self._mark_ms = now

    def step(self, bench, now):
        """Compare a window's mean with what the circuit must make of it."""
        gone = bench.gone(now)
        if not bench.window or gone < _PROVE_FIRST_MS:
            return GO
        front = bench.front
        mv = front.mean_part_mv
        path_na = bench.path_na()
        shunt_na = front.na(front.mean_code10) // 10
        if mv > _PROVE_HIGH_MV:
            return faults(FAULT_WAY_DOWN)
        if mv >= _PROVE_MV:
            return self._compare(bench, mv, path_na - shunt_na - bench.divider_na(mv), gone)
        rise = mv - self._mark_mv
        if ticks_diff(now, self._mark_ms) >= 1000:
            self._mark_mv = mv
            self._mark_ms = now
            if gone >= _PROVE_STALL_MS and rise < _PROVE_RISE_MV:
                return self._stalled(bench, mv, path_na, shunt_na)
        return faults(FAULT_WAY_DOWN) if gone > _PROVE_MOST_MS else GO

    def _compare(self, bench, mv, bleed_na, gone):
        want_mv = bleed_na // 1000 * (bench.ratings.bleed_ohm // 10) // 100
        off = mv - want_mv
        if -mv <= off * 10 <= mv:
            self._good += 1
            if self._good < 2:
                return GO
            bench.proof.followed = (
                True  # the divider has read, in this run, what the circuit made of a known voltage
            )
            return NEXT
        self._good = 0
        return faults(FAULT_WAY_DOWN) if gone > _PROVE_STALL_MS else GO

    def _stalled(self, bench, mv, path_na, shunt_na):
        """The node does not come up: a short if the shunt sees the current, a broken way if it does not."""
        if shunt_na * 10 < path_na * 8 or path_na < 100000:
            return faults(FAULT_WAY_DOWN)
        bench.short_mv = max(mv, 0)
        bench.short_na = shunt_na
        polar = bench.plan.polar and mv > POLAR_STALL_MV
        return ends(END_REVERSED if polar else END_SHORT)
