"""The account of the charge before discharge.

A part whose lead lets go while charged keeps its charge where neither witness nor bleed can reach it. So for anything that
stores more than 45 uC the supply is lowered a few volts, and the shunt must see the charge C times that step. An open lead
leaves only stray capacitance: the node follows the supply at once and the shunt sees nothing.
"""

from ..board import FINE, WIDE
from ..codes import FAULT_CHARGE_LEFT
from ..compat import const, ticks_diff
from ..shunts import LOW_FINE
from ..stage import GO, NEXT, faults

_CALM_MS = const(300)  # on the low shunt before the step: one whole window of the current that flows anyway
_LEAST_MS = const(300)
_MOST_MS = const(3000)
# Per cent of the charge expected that must be seen; absorption and leakage move it by far less.
_SHARE = const(50)


class Nudge:
    """Lower the supply by a few volts and count."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._phase = 0
        self._base_na = 0
        self._pc = 0
        self._wait_ms = 0
        self._last_ms = 0
        self._from_ms = 0

    def begin(self, bench, now):
        """Go to the low shunt, which reads the step whatever the part."""
        self._phase = 0
        self._pc = 0
        if wanted(bench):
            front = bench.front
            flowing = front.na(front.mean_code10) // 10
            fine = flowing * 100 < bench.shunts.full_na[LOW_FINE] * 60
            bench.low(now, FINE if fine else WIDE)

    def step(self, bench, now):
        """Nothing for small charges; otherwise rest, step, count."""
        if not wanted(bench):
            return NEXT
        if self._phase == 0:
            if bench.window and bench.gone(now) >= _CALM_MS:
                self._lower(bench, now)
            return GO
        front = bench.front
        ms = ticks_diff(now, self._last_ms)
        self._last_ms = now
        self._pc += (self._base_na - front.na(front.shunt_code)) * ms
        if ticks_diff(now, self._from_ms) < self._wait_ms:
            return GO
        return NEXT if self._pc * 100 >= self._expected(bench) * _SHARE else faults(FAULT_CHARGE_LEFT)

    def _lower(self, bench, now):
        self._phase = 1
        self._base_na = bench.front.na(bench.front.mean_code10) // 10
        self._last_ms = now
        self._from_ms = now
        wait = 3 * bench.ratings.tau_ms(bench.capacitance_nf)
        self._wait_ms = min(max(wait, _LEAST_MS), _MOST_MS)
        bench.supply.set(bench.supply.mv - bench.ratings.nudge_mv, now)

    def _expected(self, bench):
        """Return the charge in picocoulombs: all of C dV for small parts, the charge path's current times the wait for
        large ones, whichever is less. A leaky part's voltage follows the supply's step only in its own proportion."""
        front = bench.front
        step = bench.ratings.nudge_mv * (front.part_mv // 1000) // max(bench.supply.mv // 1000, 1)
        whole = bench.capacitance_nf * step * 9 // 10
        path = bench.ratings.nudge_mv * 1000 // (bench.ratings.charge_ohm // 1000) * self._wait_ms * 6 // 10
        return min(whole, path)


def wanted(bench):
    """Say whether the part stores enough for the account to be asked for."""
    return bench.plan.nudge and stored_nc(bench) > bench.ratings.nudge_above_nc


def stored_nc(bench):
    """Return the charge on the part in nanocoulombs, from the look's capacitance and the voltage that stands on it."""
    return bench.capacitance_nf * (bench.front.part_mv // 1000)
