"""A part in the hand and in the box: what the circuit needs of it, and what it remembers from one fitting
to the next."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import exp
from typing import Any

from dwellbench.emulator.circuit_state import Branch, Plates
from dwellbench.emulator.forming import Oxide
from dwellbench.emulator.network import Values
from dwellbench.emulator.part_spec import PartSpec, Superlinear

_NOTHING_F = 1e-12  # plate capacitance of what has no plates in circuit; without effect there


class PowerLaw:
    """Current that rises with a power of the voltage, either way round; a Branch of the circuit."""

    def __init__(self, spec: Superlinear) -> None:
        self.at_V, self.power = spec.at_V, spec.exponent
        self.at_A = spec.at_V / spec.ohm_there

    def current(self, volts: float) -> float:
        """Amperes at `volts`."""
        amps = self.at_A * float((abs(volts) / self.at_V) ** self.power)
        return amps if volts > 0.0 else -amps

    def slope(self, volts: float) -> float:
        """Siemens at `volts`."""
        return self.power * self.current(volts) / volts if volts else 0.0

    def grow(self, volts: float, time_s: float) -> None:
        """Nothing changes in it."""


class Sum:
    """Several branches side by side, the whole turned round if `reversed`."""

    def __init__(self, branches: list[Branch], reverse: bool) -> None:
        self.branches, self.sign = branches, -1.0 if reverse else 1.0

    def current(self, volts: float) -> float:
        """Amperes at `volts` of the box's polarity."""
        sign = self.sign
        return sign * sum(branch.current(sign * volts) for branch in self.branches)

    def slope(self, volts: float) -> float:
        """Siemens at `volts` of the box's polarity."""
        return sum(branch.slope(self.sign * volts) for branch in self.branches)

    def grow(self, volts: float, time_s: float) -> None:
        """Let each change."""
        for branch in self.branches:
            branch.grow(self.sign * volts, time_s)


@dataclass(frozen=True)
class Link:
    """How the part hangs in the circuit at this moment."""

    connected: bool
    extra_S: float


class Fitted:
    """One physical part; it outlives its fittings."""

    def __init__(self, spec: PartSpec, first: int = -1) -> None:
        self.spec, self.first = spec, first  # `first`: index of its first fitting
        self.farad = spec.capacitance_F or (_NOTHING_F if spec.open_lead else 0.0)
        self.ladder = spec.absorption if self.farad else ()  # (seconds, share)
        self.plates = Plates(spec.initial_V, [spec.initial_V] * len(self.ladder))
        self.oxide = Oxide(spec.forming) if spec.forming else None
        self.branch = self._branch()
        self.stressed_s = 0.0  # time above the late leak's voltage
        self.broken_lead = False
        self.flaw_on = False  # the intermittent flaw, just now
        self.fault_S = 0.0  # short or leak that a fault brought
        self.out_since_us: int | None = None

    def _branch(self) -> Branch | None:
        branches: list[Branch] = []
        if self.spec.superlinear:
            branches.append(PowerLaw(self.spec.superlinear))
        if self.oxide:
            branches.append(self.oxide)
        if not branches:
            return None
        return (
            branches[0]
            if len(branches) == 1 and not self.spec.reversed
            else Sum(branches, self.spec.reversed)
        )

    def values(self, box: Values) -> Values:
        """The circuit's values with this part in `box`."""
        spec = self.spec
        farads = [(tau, share * self.farad) for tau, share in self.ladder]
        return replace(
            box,
            capacitance_F=self.farad,
            esr_ohm=spec.esr_ohm,
            leakage_ohm=spec.leakage_ohm,
            ladder=tuple((tau / farad, farad) for tau, farad in farads),
        )

    @property
    def link(self) -> Link:
        """Connected or not, and with what beside its own leakage."""
        spec, flaw = self.spec, self.spec.intermittent
        connected = not spec.open_lead and not self.broken_lead
        extra = self.fault_S + (1.0 / spec.short_ohm if spec.short_ohm else 0.0)
        if spec.late_leak and self.stressed_s >= spec.late_leak.after_s:
            extra += 1.0 / spec.late_leak.ohm
        if flaw and self.flaw_on:
            connected = connected and flaw.what != "lead"
            extra += 1.0 / flaw.ohm if flaw.what == "leak" else 0.0
        return Link(connected, extra)

    def lie_shorted(self, time_s: float) -> None:
        """A time out of the box with a shorting wire round the leads."""
        ladder = [
            v * exp(-time_s / tau) for v, (tau, _) in zip(self.plates.ladder_V, self.ladder, strict=True)
        ]
        self.plates = Plates(0.0, ladder)
        if self.oxide:
            self.oxide.rest(time_s)

    def stored(self, plates: Plates) -> tuple[float, float]:
        """Joules and coulombs in the part at `plates`."""
        farad = self.farad
        joule, coulomb = 0.5 * farad * plates.plate_V**2, farad * plates.plate_V
        for (_, share), volts in zip(self.ladder, plates.ladder_V, strict=True):
            joule += 0.5 * share * farad * volts**2
            coulomb += share * farad * volts
        return joule, coulomb

    def state(self) -> dict[str, Any]:
        """What it remembers, JSON-able."""
        return {
            "plate_V": self.plates.plate_V,
            "ladder_V": self.plates.ladder_V,
            "oxide": self.oxide.state() if self.oxide else None,
            "stressed_s": self.stressed_s,
            "broken_lead": self.broken_lead,
            "flaw_on": self.flaw_on,
            "fault_S": self.fault_S,
            "out_since_us": self.out_since_us,
        }

    def load(self, kept: dict[str, Any]) -> None:
        """Take up a remembered state."""
        self.plates = Plates(kept["plate_V"], list(kept["ladder_V"]))
        if self.oxide and kept["oxide"]:
            self.oxide.load(kept["oxide"])
        self.stressed_s, self.fault_S = kept["stressed_s"], kept["fault_S"]
        self.broken_lead, self.flaw_on = kept["broken_lead"], kept["flaw_on"]
        self.out_since_us = kept["out_since_us"]
