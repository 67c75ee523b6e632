"""The look at 20 V: an unknown part shows short, open, reversed and far from its marking before anything is stressed.

First bleed open, supply ramped to 20 V, charge and voltage counted. What still flows once the voltage stands is leakage, in
proportion to the voltage, and is taken off. The capacitance found (a few per cent) is what every later wait is reckoned with.
"""

from ..board import FINE
from ..codes import END_OPEN, END_OVER_ENERGY, END_REVERSED, END_SHORT, END_VALUE_OFF
from ..compat import const, ticks_diff
from ..stage import GO, NEXT, POLAR_STALL_MV, ends
from .solve import capacitance_pf, standing

_RAMP = const(20000)  # millivolts a second
_ARM_MS = const(30)  # relays
_PICK_MS = const(200)  # into the ramp: choose the shunt
_BLANK_MS = const(65)  # the shunt's relay and the node behind it
_HOLD_MS = const(500)  # after the ramp, for what still flows
_LEAST_RISE_MV = const(500)  # less, and nothing can be said
_MUCH_RISE_MV = const(2000)  # enough of a large part
_MUCH_MS = const(2000)
_MOST_MS = const(20000)
_STALL_MS = const(6000)
_STALL_MV = const(5000)
_STALL_RISE_MV = const(50)  # in two seconds, with the whole current flowing: 500 uF would rise 200 mV
_OPEN_PF = const(20)  # above what an empty fixture has
_OPEN_PA = const(20000)  # an open lead does not leak: 1 Gohm at 20 V
_EMPTY_PF = const(100)  # more is a part, and no empty fixture


class Look:
    """Charge and voltage counted up to 20 V."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._phase = 0
        self._phase_ms = 0
        self._last_ms = 0
        self._mark_mv = 0
        self._mark_ms = 0
        self._from_mv = 0
        self._fc = 0  # charge so far, femtocoulombs
        self._area = 0  # voltage times time so far, mV ms
        self._ramp = (0, 0, 0)  # charge, rise and area at its end
        self._older = [0, 0, 0]  # means of the last windows, oldest first
        self._top_mv = 0

    def begin(self, bench, now):
        """Empty what the proof of the way down left, first bleed still closed."""
        bench.part_scale(FINE, now)
        bench.low(now, FINE)
        bench.supply.off(now)
        bench.relay(False, True)
        self._phase = 0
        self._phase_ms = now
        self._top_mv = min(bench.ratings.look_mv, bench.plan.volts_mv)

    def step(self, bench, now):
        """One phase after another."""
        return self._PHASES[self._phase](self, bench, now)

    def _turn(self, now):
        self._phase += 1
        self._phase_ms = now
        return GO

    def _drain(self, bench, now):
        """Wait until little is left, or as long as the largest part needs; what is left is counted from."""
        gone = ticks_diff(now, self._phase_ms)
        if gone < 150 or (bench.front.part_mv > 300 and gone < 3000):
            return GO
        bench.relay(True, True)
        return self._turn(now)

    def _arm(self, bench, now):
        if ticks_diff(now, self._phase_ms) < _ARM_MS:
            return GO
        bench.supply.mv = 0
        bench.supply.ramp(self._top_mv, _RAMP, now)
        self._mark_mv = 0
        self._mark_ms = now
        return self._turn(now)

    def _pick(self, bench, now):
        """A fifth of a second into the ramp the current says which shunt reads it."""
        if ticks_diff(now, self._phase_ms) < _PICK_MS:
            return GO
        front = bench.front
        current = front.na(front.shunt_code)
        if (
            current < 1000
        ):  # a leak's current grows fivefold until the ramp's end, a capacitance's does not grow
            level = bench.shunts.finest(max(current * 5, 60), 0)
            bench.read_on(level, now)
            front.blank(now, 60)
        return self._turn(now)

    def _blank(self, bench, now):
        if ticks_diff(now, self._phase_ms) < _BLANK_MS or not bench.front.part_fresh:
            return GO
        self._fc = 0
        self._area = 0
        self._from_mv = bench.front.part_mv
        self._last_ms = now
        return self._turn(now)

    def _count(self, bench, now):
        """Integrate until the ramp and its hold are over and enough has been seen."""
        front = bench.front
        step_ms = ticks_diff(now, self._last_ms)
        self._last_ms = now
        code = front.shunt_code
        self._fc += (front.pa(code) if front.shunt else front.na(code) * 1000) * step_ms
        self._area += front.part_mv * step_ms
        if bench.supply.ramping:
            self._ramp = (self._fc, front.part_mv - self._from_mv, self._area)
            self._phase_ms = now
            return GO
        if not bench.window:
            return GO
        stalled = self._stalls(bench, front.mean_part_mv, now)
        if stalled:
            return stalled
        return self._enough(bench, ticks_diff(now, self._phase_ms))

    def _enough(self, bench, gone):
        """Look at the last three windows: the voltage stands, or has risen far enough, or time is over."""
        front = bench.front
        mv = front.mean_part_mv
        older = self._older
        change = mv - older[0]
        older[0] = older[1]
        older[1] = older[2]
        older[2] = mv
        if gone < _HOLD_MS:
            return GO
        rise = front.part_mv - self._from_mv
        code10 = front.mean_code10
        current_pa = (front.pa(code10) if front.shunt else front.na(code10) * 1000) // 10
        stands = standing(self._fc, rise, change, current_pa, 3 * bench.ratings.window_ms)
        if (
            (stands and rise > _LEAST_RISE_MV)
            or (rise > _MUCH_RISE_MV and gone >= _MUCH_MS)
            or gone > _MOST_MS
        ):
            return self._found(bench, rise, stands, current_pa)
        return GO

    def _stalls(self, bench, mv, now):
        """Voltage that stands still well below the supply while the current flows: reversed, or shorted."""
        if ticks_diff(now, self._mark_ms) < 2000:
            return GO
        rise = mv - self._mark_mv
        self._mark_mv = mv
        self._mark_ms = now
        front = bench.front
        shunt_na = front.na(front.mean_code10) // 10
        if bench.gone(now) < _STALL_MS or mv >= _STALL_MV or rise > _STALL_RISE_MV:
            return GO
        if shunt_na * 10 < bench.path_na() * 8:
            return GO
        bench.short_mv = max(mv, 0)
        bench.short_na = shunt_na
        return ends(END_REVERSED if bench.plan.polar and mv > POLAR_STALL_MV else END_SHORT)

    def _found(self, bench, rise, stands, current_pa):
        pf, blurred = capacitance_pf(self._ramp, (self._fc, rise, self._area), stands)
        expect = bench.plan.expect_pf
        bench.capacitance_pf = pf
        if blurred and expect > pf:
            pf = expect  # what is not known is waited for as marked
        bench.capacitance_nf = pf // 1000
        return self._verdict(bench, blurred, current_pa)

    def _verdict(self, bench, blurred, current_pa):
        """Say what cannot go on. Where leakage hides the capacitance, the marking is not held against it."""
        plan = bench.plan
        ratings = bench.ratings
        pf = bench.capacitance_pf
        if plan.fixture:
            return ends(END_VALUE_OFF) if pf > _EMPTY_PF else NEXT
        if pf < _OPEN_PF and current_pa < _OPEN_PA:
            return ends(END_OPEN)
        expect = plan.expect_pf
        if expect and not blurred:
            if plan.low_pct and pf * 100 < expect * (100 - plan.low_pct):
                return ends(END_VALUE_OFF)
            if plan.high_pct and pf * 100 > expect * (100 + plan.high_pct):
                return ends(END_VALUE_OFF)
        nf = bench.capacitance_nf
        if nf > ratings.capacitance_nf or ratings.stored_mj(nf, plan.volts_mv) > ratings.energy_mj:
            return ends(END_OVER_ENERGY)
        return NEXT

    _PHASES = (_drain, _arm, _pick, _blank, _count)
