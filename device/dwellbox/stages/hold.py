"""The time of electrification: voltage held, current read on the most sensitive shunt that may be used.

Steps up follow the rules in `shunts`; a clipped reading twice running goes straight back to the low shunt. Nothing here
allocates: this is the steady state of the instrument.
"""

from ..compat import const
from ..shunts import LEVELS, LOW_FINE, LOW_WIDE
from ..stage import GO, NEXT

_FLAT_WINDOWS = const(5)
_FLAT_CODE10 = const(20)  # two codes, in tenths: what noise moves a mean by, with margin
_CLIPS = const(2)
_UP_MS = const(300)  # between two steps: one settled window is seen on each level


class Hold:
    """Hold for the plan's dwell, or until the host asks to finish."""

    def __init__(self):
        """Allocate nothing afterwards."""
        self._flat = 0
        self._last10 = 0
        self._clips = 0

    def begin(self, bench, now):
        """The dwell clock starts: the voltage is in."""
        self._flat = 0
        self._clips = 0
        self._last10 = bench.front.mean_code10

    def step(self, bench, now):
        """Count the time; look at the shunt once a window."""
        code = bench.front.shunt_code
        if code >= 32760 or code <= -32760:
            self._clips += 1
            if self._clips >= _CLIPS and bench.level > LOW_WIDE:
                self._down(bench, now)
        else:
            self._clips = 0
        if bench.window:
            self._up(bench, now)
            if bench.gone(now) >= bench.plan.dwell_ms:
                return NEXT
        return GO

    def _down(self, bench, now):
        self._clips = 0
        self._flat = 0
        bench.read_on(LOW_FINE if LEVELS[bench.level][0] else LOW_WIDE, now)

    def _up(self, bench, now):
        """One settled window on each level before the next step."""
        front = bench.front
        change = front.mean_code10 - self._last10
        self._last10 = front.mean_code10
        flat = -_FLAT_CODE10 <= change <= _FLAT_CODE10
        self._flat = self._flat + 1 if flat else 0
        if not front.settled(now) or front.clipped or not self._may(bench, now):
            return
        peak = front.peak_code if front.peak_code > 0 else 1
        level = bench.shunts.finest(front.na(peak) + 1, bench.capacitance_nf)
        if level > bench.level:
            self._flat = 0
            bench.read_on(level, now)

    def _may(self, bench, now):
        """Say whether what is left of the charge is invisible."""
        since = bench.gone(now) + 6 * bench.ratings.tau_ms(bench.capacitance_nf)
        tau = bench.ratings.tau_ms(bench.capacitance_nf)
        if since >= 12 * tau and bench.gone(now) >= _UP_MS:
            return True
        return self._flat >= _FLAT_WINDOWS and since >= 7 * tau
