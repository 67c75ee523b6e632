"""Bringing the part to voltage, by step or by ramp.

Ramp: when five time constants are under half a second the whole charge would fall between readings, so the supply is ramped
at 100 V/s and capacitance is current over slope. The shunt is the most sensitive that reads the ramp's current.

Step: the supply goes to the target at its own slew and the part follows over 400 kohm. The voltage is in after six time
constants (what is missing then, 0.25 %, is the host's to correct with C dV/dt), or earlier when it stands within 0.3 % of what
the charge path can give. A part still rising then, larger than the look found, is given as long again and no more.
"""

from ..board import FINE, WIDE
from ..codes import END_SHORT, FAULT_CHARGE_TIMEOUT, FAULT_NO_RISE, FLAG_RAMP
from ..compat import const, ticks_diff
from ..shunts import LEVELS, LOW_FINE, LOW_WIDE
from ..stage import GO, NEXT, ends, faults

_FINE_BELOW_MV = const(230000)  # the divider's fine range reads to 256 V
_ARM_MS = const(30)  # relays made before the supply moves
# After the ramp: two windows at least, and seven time constants of the charge path, by which the part lags behind.
_RAMP_REST_MS = const(200)
_RAMP_REST_TAUS = const(7)
_NO_RISE_LEAST_MS = const(400)
_CLIPS = const(2)


class Charge:
    """To the plan's voltage."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._ramp = False
        self._armed = False
        self._tau_ms = 0
        self._clips = 0
        self._rest_ms = 0
        self._mark_mv = 0
        self._mark_ms = 0

    def begin(self, bench, now):
        """Choose the way, then make the relays with the supply at nothing."""
        plan = bench.plan
        self._tau_ms = bench.ratings.tau_ms(bench.capacitance_nf)
        self._ramp = 5 * self._tau_ms < bench.ratings.ramp_below_ms
        level = LOW_WIDE
        if self._ramp:
            current_na = bench.capacitance_pf * (bench.ratings.ramp_mv_per_s // 1000) // 1000
            level = bench.shunts.finest(current_na + 20, bench.capacitance_nf)
        bench.read_on(level, now)
        bench.part_scale(FINE if plan.volts_mv < _FINE_BELOW_MV else WIDE, now)
        bench.supply.set(0, now)
        bench.relay(True, True)
        self._armed = False
        self._clips = 0
        self._rest_ms = 0
        self._mark_mv = 0
        self._mark_ms = now

    def step(self, bench, now):
        """Wait for the relays, then for the voltage."""
        if not self._armed:
            if bench.gone(now) >= _ARM_MS:
                self._arm(bench, now)
            return GO
        self._clip(bench, now)
        if bench.window:
            self._witness(bench)
        if self._ramp:
            return self._ramped(bench, now)
        return self._stepped(bench, now)

    def _arm(self, bench, now):
        self._armed = True
        bench.cut(now)
        target = supply_for(bench)
        if self._ramp:
            bench.flags = FLAG_RAMP
            bench.supply.ramp(target, bench.ratings.ramp_mv_per_s, now)
        else:
            bench.supply.set(target, now)

    def _clip(self, bench, now):
        """A clipped reading twice running goes back to a shunt that can read the current."""
        front = bench.front
        code = front.shunt_code
        if code < 32760 and code > -32760:
            self._clips = 0
            return
        self._clips += 1
        if self._clips >= _CLIPS and bench.level > LOW_WIDE:
            self._clips = 0
            bench.read_on(LOW_FINE if LEVELS[bench.level][0] else LOW_WIDE, now)

    def _witness(self, bench):
        """Both witnesses have seen the charge, so the divider may vouch for the way down."""
        mv = bench.front.mean_part_mv
        if mv > bench.ratings.disagree_mv or mv * 2 > bench.plan.volts_mv:
            bench.proof.followed = True

    def _ramped(self, bench, now):
        if bench.supply.ramping:
            return GO
        if not self._rest_ms:
            self._rest_ms = 1
            bench.cut(now)
            bench.flags = 0
            self._mark_ms = now
        if ticks_diff(now, self._mark_ms) < max(_RAMP_REST_MS, _RAMP_REST_TAUS * self._tau_ms):
            return GO
        return self._in(bench)

    def _stepped(self, bench, now):
        gone = bench.gone(now)
        if not bench.window:
            return GO
        mv = bench.front.mean_part_mv
        none = mv * 50 < bench.plan.volts_mv
        if none and gone > _NO_RISE_LEAST_MS + self._tau_ms // 4:
            shunt_na = bench.front.na(bench.front.mean_code10) // 10
            if shunt_na * 20 < bench.path_na():
                return faults(FAULT_NO_RISE)
        reach = bench.supply.mv // 1000 * 993
        if mv >= reach or gone >= 6 * self._tau_ms:
            return self._settle(bench, now, mv, gone)
        return GO

    def _settle(self, bench, now, mv, gone):
        """Six time constants are over, or the voltage is in: still rising fast means larger than the look found."""
        rise = mv - self._mark_mv
        if ticks_diff(now, self._mark_ms) >= 1000:
            self._mark_mv = mv
            self._mark_ms = now
        elif mv < bench.supply.mv // 1000 * 993:
            return GO
        if rise * 50 > mv and gone > 12 * self._tau_ms + 10000:
            return faults(FAULT_CHARGE_TIMEOUT)
        if rise * 50 > mv and mv < bench.supply.mv // 1000 * 993:
            return GO
        return self._in(bench)

    def _in(self, bench):
        """The voltage is in, or a part that passed the look has broken down under it."""
        mv = bench.front.mean_part_mv
        if mv * 20 >= bench.plan.volts_mv:
            bench.proof.followed = bench.proof.followed or mv * 2 > bench.plan.volts_mv
            return NEXT
        shunt_na = bench.front.na(bench.front.mean_code10) // 10
        if shunt_na * 10 < bench.path_na() * 8:
            return faults(FAULT_NO_RISE)  # no voltage and no current either: the way to the part is broken
        bench.short_mv = max(mv, 0)
        bench.short_na = shunt_na
        return ends(END_SHORT)


def supply_for(bench):
    """Return the supply's setting for the plan's voltage: the divider's own current drops 0.4 % over the charge path."""
    ratings = bench.ratings
    drop_mv = bench.plan.volts_mv * (ratings.charge_ohm // 1000) // ratings.divider_kohm
    mv = bench.plan.volts_mv + drop_mv
    return mv if mv < ratings.volts_mv else ratings.volts_mv
