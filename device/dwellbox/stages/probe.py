"""The proof that the shunt in use is the one that was switched to.

A shunt's relay that sticks would make a leak read a hundred or a thousand times too small, and nothing else in a run would show
it. So after the last reading, with that very shunt still in circuit, the supply is lowered at a steady rate: the part then gives
C dV/dt back, a known current, and the reading must fall by it. Only the high shunts are asked; the low one is at rest.

What it found is said after the account of the charge, for a lead that has let go fails both, and that is the graver reason.

Known limit: a part of some ten picofarads that leaks gives back less than its leak loses with the voltage; there a shunt that is
ten times too small can pass.
"""

from ..codes import FAULT_SHUNT, FLAG_RAMP
from ..compat import const, ticks_diff
from ..shunts import LEVELS
from ..stage import GO, NEXT, faults

_SHARE = const(25)  # per cent of full scale that the known current is chosen for
_MOST_RATE = const(20000)  # millivolts a second
_LEAST_RATE = const(20)
_SETTLE_TAUS = const(3)
_SETTLE_MS = const(300)  # a whole window after the settling
_MOST_MS = const(20000)
_LEAST_SEEN = const(
    40
)  # per cent of the known current; absorption, drift and the settling's rest move it by far less
_MOST_SEEN = const(250)


class Probe:
    """Lower the supply and look for C dV/dt on the shunt in use."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._before_pa = 0
        self.failed = False
        self._known_pa = 0
        self._wait_ms = 0
        self._from_ms = 0
        self._from_mv = 0

    def begin(self, bench, now):
        """Choose the rate, and begin."""
        self.failed = False
        self._known_pa = 0
        pf = bench.capacitance_pf
        shunt = LEVELS[bench.level][0]
        if shunt == 0 or pf <= 0:
            return
        front = bench.front
        kohm = (bench.ratings.shunts_ohm[shunt] + bench.ratings.charge_ohm) // 1000
        self._wait_ms = min(_SETTLE_TAUS * kohm * bench.capacitance_nf // 1000 + _SETTLE_MS, _MOST_MS)
        self._from_ms = now
        self._from_mv = bench.supply.mv
        rate = self._rate(bench, pf)
        self._known_pa = pf * rate // 1000
        self._before_pa = front.pa(front.mean_code10) // 10
        bench.flags = FLAG_RAMP
        bench.supply.ramp(self._from_mv // 2, rate, now)

    def _rate(self, bench, pf):
        """Return millivolts a second: a quarter of full scale through the part, a quarter of the voltage gone at most."""
        wanted_pa = bench.shunts.full_na[bench.level] * 10 * _SHARE
        most = min(_MOST_RATE, self._from_mv // 4 * 100 // ((self._wait_ms + 1000) // 10))
        return max(min(wanted_pa * 1000 // pf, most), _LEAST_RATE)  # pA / pF = V/s

    def step(self, bench, now):
        """Nothing for the low shunt; otherwise wait until the current has settled, and compare."""
        if not self._known_pa:
            return NEXT
        if ticks_diff(now, self._from_ms) < self._wait_ms or not bench.window:
            return GO
        front = bench.front
        seen = self._before_pa - front.pa(front.mean_code10) // 10
        gone_mv = self._from_mv - bench.supply.mv
        bench.supply.set(bench.supply.mv, now)
        bench.flags = 0
        self.failed = not self._fits(seen, gone_mv)
        return NEXT

    def _fits(self, seen, gone_mv):
        """Compare with C dV/dt and what a leak loses with the voltage: in proportion at least, eightfold if it is superlinear."""
        known = self._known_pa
        lost = max(self._before_pa, 0) // 1000 * (gone_mv * 1000 // max(self._from_mv, 1))
        return (known + lost) * _LEAST_SEEN <= seen * 100 <= known * _MOST_SEEN + lost * 800


class ProbeVerdict:
    """What the probe found, once the charge has been accounted for."""

    def __init__(self, probe):
        """Take the probe."""
        self._probe = probe

    def begin(self, bench, now):
        """Nothing to set."""

    def step(self, bench, now):
        """A fault if the known current was not seen."""
        return faults(FAULT_SHUNT) if self._probe.failed else NEXT
