"""One case before the judge: the trace, what it is measured as, what it is to be, and by which thresholds."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from dwellbench.limits.decide import Thresholds
from dwellbench.limits.demands import place_volts
from dwellbench.limits.place import Place
from dwellbench.measure.estimates import Estimates
from dwellbench.measure.leakage import Leakage
from dwellbench.measure.trace import Trace
from dwellbench.part import Part
from dwellbench.quantity import Quantity

_NEAR = 0.98  # a voltage that is in within two per cent counts as the voltage asked for


@dataclass(frozen=True)
class Case:
    """Everything that judging looks at. `asked_V`, `asked_s`: what the plan asked of the box, where that is
    known.
    """

    trace: Trace
    part: Part
    place: Place | None
    grade: str
    estimates: Estimates
    thresholds: Thresholds = field(default_factory=Thresholds)
    end: str = "complete"
    fault: str | None = None
    asked_V: float | None = None
    asked_s: float | None = None
    esr_ohm: float | None = None

    @property
    def leakage(self) -> Leakage | None:
        """The reading at the end of the dwell."""
        return self.estimates.leakage

    @property
    def capacitance(self) -> Quantity | None:
        """The capacitance found."""
        return self.estimates.capacitance_F()

    @property
    def rating_F(self) -> float | None:
        """The capacitance that formulas take: the marked one, else the one found."""
        if self.part.capacitance_F:
            return self.part.capacitance_F
        found = self.estimates.capacitance
        return found.value if found is not None and found.value > 0.0 else None

    @property
    def test_V(self) -> float | None:
        """Volts really on the part at the end of the dwell."""
        return None if self.leakage is None else self.leakage.volts_V

    @property
    def supplied_V(self) -> float | None:
        """What would stand on a part that leaks nothing: the plan's voltage, else what the supply gives past
        the divider.
        """
        if self.asked_V is not None:
            return self.asked_V
        rows = self.trace.rows("dwell")
        if not rows.any():
            return None
        circuit = self.estimates.circuit
        return float(np.median(self.trace.v_supply_V[rows])) * circuit.thevenin_ohm / circuit.charge_ohm

    @property
    def valid_to_V(self) -> float | None:
        """The voltage up to which the verdict holds: a named one (asked for, the place's, the rating) if it
        was in within two per cent, else the one that was.
        """
        test_V = self.test_V
        if test_V is None:
            return None
        named = (self.asked_V, self.place.given_V if self.place else None, self.part.rated_V)
        near = [value for value in named if value is not None and _NEAR * value <= test_V <= value / _NEAR]
        return near[0] if near else float(f"{test_V:.3g}")

    @property
    def place_V(self) -> float | None:
        """The place's voltage: as the role gave it, else its usual one as far as the part's rating goes."""
        return None if self.place is None else place_volts(self.place, self.part)

    @property
    def temperature_C(self) -> float | None:
        """Temperature beside the part."""
        return self.trace.number("temperature_C")
