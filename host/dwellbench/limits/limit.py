"""One published limit: what it bounds, by what formula, for which parts, at what time, on whose word.

Formulas are data: a shape and its numbers. Leakage maxima of electrolytics read "whichever is greater" or
"plus", insulation minima "whichever is less"; the shapes keep these apart, because each is easily taken for
the other.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

from dwellbench.part import Part

TOTAL_CURRENT, INSULATION = "total_current_A", "insulation_ohm"
UNITS = {TOTAL_CURRENT: "A", INSULATION: "ohm", "capacitance_F": "F", "rated_V": "V"}

PUBLISHED = "published standard"
DATA_SHEET = "data sheet"
HANDBOOK = "handbook or article"
COMMON = "common practice, no source"
MEMORY = "from memory"
UNSURE = "from memory, unsure"
STATUSES = (PUBLISHED, DATA_SHEET, HANDBOOK, COMMON, MEMORY, UNSURE)

# Shapes of a leakage maximum in microamperes, C in microfarads, V the rated volts.
CURRENT_SHAPES = {
    "greater": lambda cv, c, k, floor: max(k * cv, floor),
    "plus": lambda cv, c, k, floor: k * cv + floor,
    "root": lambda cv, c, k, floor: k * sqrt(cv) + floor,
    "by_capacitance": lambda cv, c, k, floor: k * c + floor,
}


@dataclass(frozen=True)
class Limit:
    """One row. For currents `numbers` is (k, floor in uA); for insulation (Mohm, Mohm uF), either may be
    None.

    `volts` and `farads` bound the ratings it holds for (low < x <= high). `rules` says whether it decides by
    itself, or only stands beside the one that does. `time_s` is the time of electrification it is stated for.
    """

    id: str
    quantity: str
    shape: str
    numbers: tuple[float | None, float | None]
    dielectrics: tuple[str, ...]
    grades: tuple[str, ...]
    time_s: float
    source: str
    status: str
    rules: bool = True
    volts: tuple[float, float] = (0.0, float("inf"))
    farads: tuple[float, float] = (0.0, float("inf"))

    def holds_for(self, part: Part, capacitance_F: float | None, grade: str) -> bool:
        """Whether the limit speaks of such a part."""
        if part.dielectric not in self.dielectrics or grade not in self.grades or capacitance_F is None:
            return False
        if not self.farads[0] < capacitance_F <= self.farads[1]:
            return False
        if part.rated_V is None:
            return self.quantity == INSULATION and self.volts == (0.0, float("inf"))
        return self.volts[0] < part.rated_V <= self.volts[1]

    @property
    def may_reject(self) -> bool:
        """A limit that nobody here is sure of may bless a part, but not condemn one."""
        return self.status != UNSURE

    def value(self, capacitance_F: float, rated_V: float | None) -> float:
        """The limit in SI units for this capacitance and rating: amperes at most, or ohms at least."""
        if self.quantity == INSULATION:
            return self._insulation(capacitance_F)
        if rated_V is None:
            raise ValueError("a leakage formula needs the rated voltage")
        k, floor = self.numbers
        c = capacitance_F * 1e6
        return 1e-6 * float(CURRENT_SHAPES[self.shape](c * rated_V, c, k or 0.0, floor or 0.0))

    def _insulation(self, capacitance_F: float) -> float:
        """Whichever is less of the resistance and the time constant over C; or the break at a stated
        capacitance.
        """
        mohm, mohm_uF = self.numbers
        by_C = float("inf") if mohm_uF is None else mohm_uF / (capacitance_F * 1e6)
        return 1e6 * min(float("inf") if mohm is None else mohm, by_C)


def at_most_A(limit: Limit, volts_V: float, capacitance_F: float, rated_V: float | None) -> float:
    """The limit as the current that may flow at `volts_V`: readings are normal in current."""
    value = limit.value(capacitance_F, rated_V)
    return value if limit.quantity == TOTAL_CURRENT else volts_V / value
