"""The look at 20 V: an unknown part shows short, open, reversed and far from its marking before anything is stressed.

First bleed open, supply ramped to 20 V, charge and voltage counted. What still flows once the voltage stands is leakage, in
proportion to the voltage, and is taken off. The capacitance found (a few per cent) is what every later wait is reckoned with.
"""

from ..board import FINE
from ..codes import END_OPEN, END_OVER_ENERGY, END_REVERSED, END_SHORT, END_VALUE_OFF
from ..compat import const, ticks_diff
from ..stage import GO, NEXT, POLAR_STALL_MV, ends

_RAMP = const(20000)  # millivolts a second
_ARM_MS = const(30)  # relays
_PICK_MS = const(200)  # into the ramp: choose the shunt
_BLANK_MS = const(65)  # the shunt's relay and the node behind it
_HOLD_MS = const(500)  # after the ramp, for what still flows
_LEAST_RISE_MV = const(1000)  # enough of a large part
_MOST_MS = const(20000)
_STALL_MS = const(6000)
_STALL_MV = const(5000)
_STALL_RISE_MV = const(50)  # in two seconds, with the whole current flowing: 500 uF would rise 200 mV
_OPEN_PF = const(20)  # above what an empty fixture has


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
        self._half = (0, 0, 0)  # charge, rise and area at the end of the ramp

    def begin(self, bench, now):
        """Empty what the proof of the way down left, first bleed still closed."""
        bench.part_scale(FINE, now)
        bench.low(now, FINE)
        bench.supply.off(now)
        bench.relay(False, True)
        self._phase = 0
        self._phase_ms = now

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
        bench.supply.ramp(bench.ratings.look_mv, _RAMP, now)
        self._mark_mv = 0
        self._mark_ms = now
        return self._turn(now)

    def _pick(self, bench, now):
        """A fifth of a second into the ramp the current says which shunt reads it."""
        if ticks_diff(now, self._phase_ms) < _PICK_MS:
            return GO
        front = bench.front
        current = front.na(front.shunt_code)
        if current < 1000:
            level = bench.shunts.finest(max(current, 60), 0)
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
            self._half = (self._fc, front.part_mv - self._from_mv, self._area)
            self._phase_ms = now
            return GO
        if not bench.window:
            return GO
        stalled = self._stalls(bench, front.mean_part_mv, now)
        if stalled:
            return stalled
        gone = ticks_diff(now, self._phase_ms)
        rise = front.part_mv - self._from_mv
        if (gone >= _HOLD_MS and rise > _LEAST_RISE_MV) or gone > _MOST_MS:
            return self._found(bench, rise)
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
        bench.short_mv = mv
        bench.short_na = shunt_na
        return ends(END_REVERSED if bench.plan.polar and mv > POLAR_STALL_MV else END_SHORT)

    def _found(self, bench, rise):
        """Solve charge = C rise + G area over the ramp and over the hold: what leaks is not taken for capacitance."""
        charge1, rise1, area1 = self._half
        charge2 = self._fc - charge1
        rise2 = rise - rise1
        area2 = self._area - area1
        below = rise1 * area2 - rise2 * area1
        if below > 0:
            pf = (charge1 * area2 - charge2 * area1) // below  # fC / mV = pF
        else:
            pf = self._fc // max(rise, 1)
        pf = max(pf, 0)
        bench.capacitance_pf = pf
        bench.capacitance_nf = pf // 1000
        return self._verdict(bench, pf)

    def _verdict(self, bench, pf):
        plan = bench.plan
        ratings = bench.ratings
        if pf < _OPEN_PF:
            return ends(END_OPEN)
        expect = plan.expect_pf
        if expect and plan.low_pct and pf * 100 < expect * (100 - plan.low_pct):
            return ends(END_VALUE_OFF)
        if expect and plan.high_pct and pf * 100 > expect * (100 + plan.high_pct):
            return ends(END_VALUE_OFF)
        nf = bench.capacitance_nf
        if nf > ratings.capacitance_nf or ratings.stored_mj(nf, plan.volts_mv) > ratings.energy_mj:
            return ends(END_OVER_ENERGY)
        return NEXT

    _PHASES = (_drain, _arm, _pick, _blank, _count)
