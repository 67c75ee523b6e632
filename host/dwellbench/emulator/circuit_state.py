"""What the circuit holds: its state, which contacts are where, what part is in it; going from one network
to another.

Charge is conserved in every change: capacitor voltages go over as they are, and plates that are joined
share.
"""

from __future__ import annotations

from cmath import rect
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from math import exp
from typing import Any, NamedTuple, Protocol

from dwellbench.emulator import reference
from dwellbench.emulator.modal import Drive, Modal, Modes, Step, make_look, make_step
from dwellbench.emulator.network import CLAMP_OFF, Switches, Values, build, off_bleed_S

PERIOD_S = 5e-3


_KEPT = ("s", "r", "rc", "rs", "mc", "ms", "_clamp", "_tangent", "high_mean", "low_mean", "supply_mean")


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


class CircuitState:
    """One box's circuit with one part in it, at one instant. Volts, amperes, seconds."""

    def __init__(
        self,
        values: Values,
        omega: float,
        windows_s: tuple[float, float],
        mains_A: complex,
        ripple_V: complex,
    ):
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
            c * f for c, f in zip(modal.plate.modes, modal.after((0.0,) * modal.size, half, 1.0), strict=True)
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
        """Voltages just after the part's plates were joined to the clips (through its lead, in
        nanoseconds)."""
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

    # -- keeping

    def state(self) -> dict[str, Any]:
        """What changes, JSON-able; the part's values are the part's own."""
        kept = {name: getattr(self, name) for name in _KEPT}
        return {**kept, "contacts": list(self.contacts), "y": list(self.y)}

    def load(self, kept: dict[str, Any], values: Values, branch: Branch | None) -> None:
        """Take up what `state` gave, with this part in the box."""
        for name in _KEPT:
            setattr(self, name, kept[name])
        self.contacts = Switches(*kept["contacts"])
        self.values, self.branch = values, branch
        self._settings.clear()
        self._use(self._switches())
        self.y = tuple(kept["y"])


def _turn(angle: float) -> tuple[float, float]:
    one = rect(1.0, angle)
    return one.real, one.imag
