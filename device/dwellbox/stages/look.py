"""The look at 20 V: an unknown part shows short, open, reversed and far from its marking before anything is stressed.

First bleed open, supply ramped to 20 V, charge and voltage counted. What still flows once the voltage stands is leakage, in
proportion to the voltage, and is taken off. The capacitance found (a few per cent) is what every later wait is reckoned with.
"""

from ..board import FINE
from ..codes import END_OPEN, END_OVER_ENERGY, END_REVERSED, END_SHORT, END_VALUE_OFF
from ..compat import const, ticks_diff
from ..stage import GO, NEXT, POLAR_STALL_MV, ends

_LOOK_RAMP = const(20000)  # millivolts a second
_LOOK_ARM_MS = const(30)  # relays
_LOOK_PICK_MS = const(200)  # into the ramp: choose the shunt
_LOOK_HOLD_MS = const(400)
_LOOK_MOST_MS = const(20000)
_LOOK_STALL_MS = const(6000)
_STALL_MV = const(5000)
_OPEN_PF = const(20)


class Look:
    """Charge and voltage counted up to 20 V."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._phase = 0
        self._phase_ms = 0
        self._counting = False
        self._fc = 0  # charge in femtocoulombs on the high shunts, picocoulombs on the low one
        self._area = 0  # millivolt milliseconds
        self._from_mv = 0
        self._mark_mv = 0
        self._mark_ms = 0
        self._last_ms = 0

    def begin(self, bench, now):
        """Empty what the proof of the way down left, first bleed still closed."""
        bench.part_scale(FINE, now)
        bench.low(now, FINE)
        bench.supply.off(now)
        bench.relay(False, True)
        self._phase = 0
        self._phase_ms = now
        self._counting = False

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
        if ticks_diff(now, self._phase_ms) < _LOOK_ARM_MS:
            return GO
        bench.supply.mv = 0
        bench.supply.ramp(bench.ratings.look_mv, _LOOK_RAMP, now)
        self._mark_mv = 0
        self._mark_ms = now
        return self._turn(now)

    def _pick(self, bench, now):
        """A fifth of a second into the ramp the current says which shunt reads it."""
        if ticks_diff(now, self._phase_ms) < _LOOK_PICK_MS:
            return GO
        front = bench.front
        current = front.na(front.shunt_code)
        if current < 1000:
            level = bench.shunts.finest(max(current, 60), 0)
            bench.read_on(level, now)
            front.blank(now, 60)
        return self._turn(now)

    def _blank(self, bench, now):
        if ticks_diff(now, self._phase_ms) < 65 or not bench.front.part_fresh:
            return GO
        self._fc = 0
        self._area = 0
        self._from_mv = bench.front.part_mv
        self._last_ms = now
        self._counting = True
        return self._turn(now)

    def _count(self, bench, now):
        """Integrate until the ramp and its hold are over, or enough has been seen of a large part."""
        front = bench.front
        step_ms = ticks_diff(now, self._last_ms)
        self._last_ms = now
        code = front.shunt_code
        self._fc += (front.pa(code) if front.shunt else front.na(code)) * step_ms
        self._area += (front.part_mv - self._from_mv) * step_ms
        gone = ticks_diff(now, self._phase_ms)
        if not bench.window:
            return GO
        mv = front.mean_part_mv
        top = bench.ratings.look_mv
        stalled = self._stalls(bench, mv, now)
        if stalled:
            return stalled
        over = not bench.supply.ramping and gone > 1000 + _LOOK_HOLD_MS
        near = mv > top * 9 // 10
        enough = gone > 2500 and front.part_mv - self._from_mv > 1000
        if (over and near) or enough or gone > _LOOK_MOST_MS:
            return self._found(bench, now, near)
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
        if bench.gone(now) < _LOOK_STALL_MS or mv >= _STALL_MV or rise > 50:
            return GO
        if shunt_na * 10 < bench.path_na() * 8:
            return GO
        bench.short_mv = mv
        bench.short_na = shunt_na
        return ends(END_REVERSED if bench.plan.polar and mv > POLAR_STALL_MV else END_SHORT)

    def _found(self, bench, now, settled):
        """Turn charge and voltage into a capacitance and compare it with what was expected."""
        front = bench.front
        rise = front.part_mv - self._from_mv
        if rise < 100:
            rise = 100
        pc1000 = self._fc if front.shunt else self._fc * 1000  # femtocoulombs
        if settled:  # what still flows at a standing voltage is leakage, in proportion to the voltage
            code10 = front.mean_code10
            leak_pa = (front.pa(code10) if front.shunt else front.na(code10) * 1000) // 10
            area = self._area + self._from_mv * ticks_diff(now, self._phase_ms)
            pc1000 -= leak_pa * area // (front.mean_part_mv if front.mean_part_mv > 1000 else 1000)
        pf = pc1000 // rise  # fC / mV = pF
        if pf < 0:
            pf = 0
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
