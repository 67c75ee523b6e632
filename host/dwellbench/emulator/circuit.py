"""The circuit in time: state, switching, the clamp, the nonlinear branch; one 5 ms period a call.

Between switchings the network is linear and its step exact (modal.py). A nonlinear branch i(u) across the plates is split into
its tangent conductance, which goes into the network in powers of two, and the rest, held over the step at its value half a
step ahead: second order, and stable however steep the branch is. The clamp is a switch thrown when the low node crosses it.
"""

from __future__ import annotations

from cmath import rect
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import exp, log2
from typing import NamedTuple, Protocol

from dwellbench.emulator import reference
from dwellbench.emulator.modal import Drive, Modal, Modes, Output, Step, make_look, make_step
from dwellbench.emulator.network import CLAMP_OFF, Switches, Values, build, off_bleed_S

PERIOD_S = 5e-3
_CLAMP_WATCH_V = 4.0  # a mean beyond this sends the period through the careful path
_PROBES_S = (1e-6, 1e-5, 1e-4, 1e-3)  # after a switching the low node may strike the clamp and be back within the segment
_CROSSING_S = 1e-8
_LEAST_SEGMENT_S = 1e-6


class Branch(Protocol):
    """A conduction through the part that is not ohmic."""

    def current(self, volts: float) -> float: ...

    def slope(self, volts: float) -> float: ...

    def grow(self, volts: float, time_s: float) -> None:
        """Let oxide and the like change for `time_s` at `volts`."""


class _Setting(NamedTuple):
    modal: Modal
    step: Step
    look: Callable[[Modes, float, float], tuple[float, float]]
    half_kick: float  # plate volts half a period on, per ampere of nonlinear conduction


@dataclass
class Plates:
    """What a part remembers when it is taken out: its plate voltage and those of its ladder."""

    plate_V: float
    ladder_V: list[float]


@lru_cache(maxsize=2048)
def _modal(values: Values, switches: Switches, omega: float) -> Modal:
    return Modal(build(values, switches), omega)


class Circuit:
    """One box's circuit with one part in it. Volts, amperes, seconds.

    `high_mean`, `low_mean`, `supply_mean` are means over the converters' own windows in the period done last.
    """

    def __init__(self, values: Values, omega: float, windows_s: tuple[float, float], mains_A: complex, ripple_V: complex):
        self.values, self.omega, self.windows = values, omega, windows_s
        self.branch: Branch | None = None
        self.s = self.r = 0.0
        self.rc, self.rs, self.mc, self.ms = ripple_V.real, ripple_V.imag, mains_A.real, mains_A.imag
        turn = _turn(omega * PERIOD_S)
        self._turns = (*_turn(2.0 * omega * PERIOD_S), *turn)
        self._settings: dict[Switches, _Setting] = {}
        self.contacts = Switches()
        self._clamp, self._tangent, self._volts_then = CLAMP_OFF, 0.0, 0.0
        self.high_mean = self.low_mean = self.supply_mean = 0.0
        self._off_decay = exp(-PERIOD_S * off_bleed_S(values) / reference.box().supply_F)
        self._use(self._switches())
        self.y: Modes = self.modal.enter([0.0] * self.modal.size, self.drive)

    # -- what is in circuit

    @property
    def drive(self) -> Drive:
        return Drive(self.s, self.r, complex(self.rc, self.rs), complex(self.mc, self.ms))

    def _switches(self) -> Switches:
        contacts = self.contacts
        if not self._clamp and not self._tangent:
            return contacts
        return contacts._replace(clamp=self._clamp, extra_S=contacts.extra_S + self._tangent)

    def _use(self, switches: Switches) -> None:
        found = self._settings.get(switches)
        if found is None:
            found = self._settings[switches] = self._make(switches)
        self.modal, self._step, self._look, self._half_kick = found

    def _make(self, switches: Switches) -> _Setting:
        modal = _modal(self.values, switches, self.omega)
        half = PERIOD_S / 2
        kick = sum(
            c * f
            for c, f in zip(modal.plate.modes, modal.after((0.0,) * modal.size, half, 1.0), strict=True)
        )
        step = make_step(modal, PERIOD_S, *self.windows, kicked=self.branch is not None)
        return _Setting(modal, step, make_look(modal, half), kick)

    def states(self) -> tuple[float, float, Plates]:
        """Voltage across the clips behind the lead, low node, and the part's own plates."""
        x = self.modal.leave(self.y, self.drive)
        net = self.modal.net
        if net.supply_state >= 0:
            self.s = x[net.supply_state]
        first = max(net.plate + 1, 2)
        return x[0], x[1], Plates(x[net.plate], x[first : first + len(self.values.ladder)])

    def _enter(self, across: float, low: float, plates: Plates) -> None:
        net = self.modal.net
        x = [across, low] if net.plate == 0 else [across, low, plates.plate_V]
        x += plates.ladder_V
        if net.supply_state >= 0:
            x.append(self.s)
        self.y = self.modal.enter(x, self.drive)

    def _rebuild(self) -> None:
        """Go over to the network of the present contacts, clamp and tangent; charge is conserved."""
        joined = self.modal.net.plate == 0
        across, low, plates = self.states()
        self._use(self._switches())
        if self.modal.net.plate == 0 and not joined:
            across, low = self._join(across, low, plates.plate_V)
        self._enter(across, low, plates)

    def _join(self, across: float, low: float, plate: float) -> tuple[float, float]:
        """Voltages just after the part's plates were joined to the clips (through its lead, in nanoseconds)."""
        c, fixture, stray, cable = (
            self.values.capacitance_F,
            reference.FIXTURE_F,
            reference.STRAY_F,
            reference.LOW_F,
        )
        q_u = c * plate + fixture * across + stray * (across + low)
        q_l = stray * (across + low) + cable * low
        a, b, d = c + fixture + stray, stray, stray + cable
        det = a * d - b * b
        return (d * q_u - b * q_l) / det, (a * q_l - b * q_u) / det

    def switch(self, contacts: Switches) -> None:
        """Throw contacts, now."""
        if contacts != self.contacts:
            self.contacts = contacts
            self._rebuild()

    def fit(self, values: Values, branch: Branch | None, plates: Plates) -> None:
        """Put another part in; the clips keep what they have (the part's lead joins them afterwards)."""
        across, low, _ = self.states()
        self.values, self.branch = values, branch
        self._settings.clear()
        self._tangent = 0.0
        self._use(self._switches())
        if self.modal.net.plate == 0:
            across, low = self._join(across, low, plates.plate_V)
        self._enter(across, low, plates)

    def set_slope(self, r: float) -> None:
        """Let the supply, which is on, rise by `r` V/s from now on."""
        change = r - self.r
        if change:
            self.r = r
            self.y = tuple(a - change * b for a, b in zip(self.y, self.modal.at_r, strict=True))

    def set_supply(self, volts: float) -> None:
        """Take off the rounding that slopes leave in the supply's voltage (it is on and steady)."""
        self.s = volts

    # -- one period

    def period(self, changes: Sequence[tuple[float, Switches]] = ()) -> None:
        """Advance 5 ms; `changes` are contacts thrown on the way: seconds into the period, in order."""
        if changes or self._clamp:
            self._careful(changes)
            return
        j = self._held() if self.branch is not None else 0.0
        y, high, low = self._step(self.y, self.s, self.r, self.rc, self.rs, self.mc, self.ms, j)
        if not -_CLAMP_WATCH_V < low < _CLAMP_WATCH_V:
            self._careful(changes)
            return
        self.y, self.high_mean, self.low_mean = y, high, low
        if self.branch is not None:
            self.branch.grow(self._volts_then, PERIOD_S)
        self._advance_drive()

    def _held(self) -> float:
        """Nonlinear conduction beyond its tangent, at its value half a period ahead."""
        branch = self.branch
        assert branch is not None
        now, then = self._look(self.y, self.s, self.r)
        g = self._tangent
        then += self._half_kick * (branch.current(now) - g * now)
        if self._retangent(branch.slope(then)):
            return self._held()
        self._volts_then = then
        return branch.current(then) - g * then

    def _retangent(self, slope: float) -> bool:
        """Take another tangent into the network if the present one is a poor fit; True if so."""
        stiff, g = slope * PERIOD_S / self.values.capacitance_F, self._tangent
        if (stiff < 0.1) if not g else (stiff > 0.02 and 0.5 * g < slope < 2.0 * g):
            return False
        self._tangent = 2.0 ** round(log2(slope)) if stiff > 0.02 else 0.0
        self._rebuild()
        return True

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
        if self.branch is not None:
            self._retangent(self.branch.slope(self.modal.plate.now(self.y, self.drive)))
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
        modal, y, drive = self.modal, self.y, self.drive
        j = self._held_current(length)
        self._add(modal.high, at, length, j, 0, sums)
        self._add(modal.low, at, length, j, 1, sums)
        within = min(length, self.windows[0] - at)
        if within > 0.0:
            sums[2] += self._supply_integral(within, j)
        self.y = modal.after(y, length, j)
        turned = modal.turn(drive, length)
        self.rc, self.rs, self.mc, self.ms = (
            turned.ripple.real,
            turned.ripple.imag,
            turned.mains.real,
            turned.mains.imag,
        )
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

    def _held_current(self, length: float) -> float:
        branch = self.branch
        if branch is None:
            return 0.0
        modal, g = self.modal, self._tangent
        now = modal.plate.now(self.y, self.drive)
        half = modal.after(self.y, 0.5 * length, branch.current(now) - g * now)
        then = modal.plate.now(half, modal.turn(self.drive, 0.5 * length))
        branch.grow(then, length)
        return branch.current(then) - g * then


def _turn(angle: float) -> tuple[float, float]:
    one = rect(1.0, angle)
    return one.real, one.imag
