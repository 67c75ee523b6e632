"""The circuit in time: one 5 ms period a call, in one exact step where nothing switches, in segments where
something does.

Between switchings the network is linear and its step exact (modal.py). A nonlinear branch i(u) across the
plates is split into its tangent conductance, which goes into the network in powers of two, and the rest,
held over the step at its value half a step ahead: second order, and stable however steep the branch is.
The clamp is a switch thrown when the low node crosses it.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import exp, log2

from dwellbench.emulator import reference
from dwellbench.emulator.circuit_state import PERIOD_S, CircuitState
from dwellbench.emulator.modal import Output
from dwellbench.emulator.network import CLAMP_OFF, Switches, off_bleed_S

_CLAMP_WATCH_V = 4.0  # a mean beyond this sends the period through the careful path
# after a switching the low node may strike the clamp and be back within the segment
_PROBES_S = (1e-6, 1e-5, 1e-4, 1e-3)
_CROSSING_S = 1e-10
_LEAST_SEGMENT_S = 1e-6
_LEAST_BEND_S = 1e-8


class Circuit(CircuitState):
    """One box's circuit with one part in it, stepped.

    `high_mean`, `low_mean`, `supply_mean` are means over the converters' own windows in the period done last.
    """

    def period(self, changes: Sequence[tuple[float, Switches]] = ()) -> None:
        """Advance 5 ms; `changes` are contacts thrown on the way: seconds into the period, in order."""
        branch = self.branch
        j = 0.0
        if changes or self._clamp or (branch is not None and not self._foresee()):
            self._careful(changes)
            return
        if branch is not None:
            j = branch.current(self._volts_then) - self._tangent * self._volts_then
        y, high, low = self._step(self.y, self.s, self.r, self.rc, self.rs, self.mc, self.ms, j)
        if not -_CLAMP_WATCH_V < low < _CLAMP_WATCH_V:
            self._careful(changes)
            return
        self.y, self.high_mean, self.low_mean = y, high, low
        if branch is not None:
            branch.grow(self._volts_then, PERIOD_S)
        self._advance_drive()

    def _foresee(self) -> bool:
        """Foresee the plate voltage half a period on; False if the tangent does not serve that far."""
        branch = self.branch
        assert branch is not None
        now, then = self._look(self.y, self.s, self.r)
        if not self._fits(branch.slope(now), PERIOD_S):
            self._retangent(branch.slope(now))
            now, then = self._look(self.y, self.s, self.r)
        then += self._half_kick * (branch.current(now) - self._tangent * now)
        self._volts_then = then
        return self._fits(branch.slope(then), PERIOD_S)

    def _fits(self, slope: float, length: float) -> bool:
        """Is what the tangent leaves of the branch small in such a step, or the tangent near enough?"""
        g = self._tangent
        return 0.5 * g < slope < 2.0 * g or abs(slope - g) * length < 0.1 * self.values.capacitance_F

    def _retangent(self, slope: float) -> None:
        """Take another tangent into the network."""
        soft = slope * PERIOD_S < 0.02 * self.values.capacitance_F
        self._tangent = 0.0 if soft else 2.0 ** round(log2(slope))
        self._rebuild()

    def _advance_drive(self) -> None:
        a, b, c, d = self._turns
        rc, rs, mc, ms = self.rc, self.rs, self.mc, self.ms
        self.rc, self.rs = rc * a - rs * b, rs * a + rc * b
        self.mc, self.ms = mc * c - ms * d, ms * c + mc * d
        if self.contacts.supply_on:
            self.supply_mean = self.s + 0.5 * self.r * self.windows[0]
            self.s += self.r * PERIOD_S
        elif self.modal.supply is None:
            self.supply_mean = self.s
            self.s *= self._off_decay
        else:
            self.supply_mean = self.s = self.modal.supply.now(self.y, self.drive)

    # -- the careful path: switchings, clamp

    def _careful(self, changes: Sequence[tuple[float, Switches]]) -> None:
        sums = [0.0, 0.0, 0.0]
        at = 0.0
        for when, contacts in changes:
            self._advance(at, when, sums)
            self.switch(contacts)
            at = when
        self._advance(at, PERIOD_S, sums)
        first, second = self.windows
        self.high_mean, self.low_mean, self.supply_mean = sums[0] / first, sums[1] / second, sums[2] / first

    def _advance(self, start: float, end: float, sums: list[float]) -> None:
        at = start
        fresh = True
        while end - at > 1e-12:
            length = self._until_clamp(end - at, fresh)
            self._segment(at, length, sums)
            at += length
            fresh = False

    def _beyond(self, low: float) -> bool:
        """Is the clamp in the wrong position for this voltage of the low node?"""
        limit = reference.box().clamp_V
        return abs(low) > limit if not self._clamp else low * self._clamp < limit

    def _low_at(self, time: float) -> float:
        modal = self.modal
        return modal.low.now(modal.after(self.y, time), modal.turn(self.drive, time))

    def _until_clamp(self, length: float, fresh: bool) -> float:
        """Throw the clamp if it must be; give the time to the next throw, at most `length`."""
        low = self._low_at(0.0)
        if self._beyond(low):
            self._clamp = CLAMP_OFF if self._clamp else (1 if low > 0 else -1)
            self._rebuild()
            return min(length, _LEAST_SEGMENT_S)
        times = [t for t in _PROBES_S if t < length] + [length] if fresh else [length]
        for time in times:
            if self._beyond(self._low_at(time)):
                return max(self._crossing(time), min(_CROSSING_S, length))
        return length

    def _crossing(self, late: float) -> float:
        early = 0.0
        while late - early > _CROSSING_S:
            middle = 0.5 * (early + late)
            early, late = (early, middle) if self._beyond(self._low_at(middle)) else (middle, late)
        return late

    def _segment(self, at: float, length: float, sums: list[float]) -> None:
        """Step by `length`; in halves, and those in halves, where a nonlinear branch bends too much."""
        if self.branch is None:
            self._linear(at, length, 0.0, sums)
            return
        then = self._foreseen(length)
        if length > _LEAST_BEND_S and not self._fits(self.branch.slope(then), length):
            self._segment(at, 0.5 * length, sums)
            self._segment(at + 0.5 * length, 0.5 * length, sums)
            return
        self._linear(at, length, self.branch.current(then) - self._tangent * then, sums)
        self.branch.grow(then, length)

    def _foreseen(self, length: float) -> float:
        """Plate voltage in the middle of the next `length` seconds."""
        branch = self.branch
        assert branch is not None
        now = self.modal.plate.now(self.y, self.drive)
        if not self._fits(branch.slope(now), length):
            self._retangent(branch.slope(now))
        modal = self.modal
        half = modal.after(self.y, 0.5 * length, branch.current(now) - self._tangent * now)
        return modal.plate.now(half, modal.turn(self.drive, 0.5 * length))

    def _linear(self, at: float, length: float, j: float, sums: list[float]) -> None:
        """One exact step with `j` amperes held through the part, `at` seconds into the period."""
        modal, drive = self.modal, self.drive
        self._add(modal.high, at, length, j, 0, sums)
        self._add(modal.low, at, length, j, 1, sums)
        within = min(length, self.windows[0] - at)
        if within > 0.0:
            sums[2] += self._supply_integral(within, j)
        self.y = modal.after(self.y, length, j)
        turned = modal.turn(drive, length)
        self.rc, self.rs = turned.ripple.real, turned.ripple.imag
        self.mc, self.ms = turned.mains.real, turned.mains.imag
        if self.contacts.supply_on:
            self.s = turned.s
        elif modal.supply is None:
            self.s *= exp(-length * off_bleed_S(self.values) / reference.box().supply_F)
        else:
            self.s = modal.supply.now(self.y, self.drive)

    def _add(self, out: Output, at: float, length: float, j: float, which: int, sums: list[float]) -> None:
        within = min(length, self.windows[which] - at)
        if within > 0.0:
            sums[which] += self.modal.integral(out, self.y, self.drive, within, j)

    def _supply_integral(self, within: float, j: float) -> float:
        if self.contacts.supply_on:
            return (self.s + 0.5 * self.r * within) * within
        if self.modal.supply is None:
            return self.s * within
        return self.modal.integral(self.modal.supply, self.y, self.drive, within, j)
