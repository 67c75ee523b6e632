"""Oxide that leaks by field, grows by charge, and relaxes: the `[part.forming]` table.

An electrolytic's dielectric is oxide grown to some voltage. Held below that it leaks little, near it much,
for the current through oxide rises with a high power of the field; and the charge that leaks grows it
thicker. So a part kept on a shelf draws much at first, holds below the asked voltage until its oxide has
grown there, and its leakage then falls slowly. Let

    i = formed_A (V / F)^exponent + cracks_A exp(-q / cracks_C) V / F
    dF/dt = i / coulomb_per_V while F < limit_V
    F = lasting oxide + fresh oxide, volts;  q = charge that went through the cracks

New oxide is fresh: under more than half of F it sets, with time constant `settle_s`; without, it is lost
with `relax_s`, so that a part re-formed in a hurry is found leaking again later. Connected backwards,
oxide conducts freely: 1 mA at `reverse_V`, with the sixth power of the voltage.

| key | unit | default | is |
|---|---|---|---|
| formed_V | V | required | oxide as found |
| limit_V | V | 1.1 x formed_V | the electrolyte forms no further |
| formed_A | A | 5e-5 | leakage at V = F |
| exponent | | 8 | of the field |
| coulomb_per_V | C/V | 2e-4 | charge that adds a volt of oxide |
| cracks_A | A | 0 | extra current of cracked sites at V = F, healed by its own charge |
| cracks_C | C | 1e-3 | charge that heals them to 1/e |
| settle_s | s | 1800 | fresh oxide setting under voltage |
| relax_s | s | 7200 | fresh oxide lost without |
| reverse_V | V | 1.5 | where 1 mA flows backwards |

The shape follows general accounts of anodic oxide (field-assisted conduction, growth by charge); the
numbers are illustrative, from memory, and of no particular make.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import exp

_REVERSE_A = 1e-3
_REVERSE_POWER = 6.0
_LEAST_V = 1.0  # no oxide is thinner: keeps the field finite


@dataclass(frozen=True)
class Forming:
    """The table's values; see the module."""

    formed_V: float
    limit_V: float
    formed_A: float = 5e-5
    exponent: float = 8.0
    coulomb_per_V: float = 2e-4
    cracks_A: float = 0.0
    cracks_C: float = 1e-3
    settle_s: float = 1800.0
    relax_s: float = 7200.0
    reverse_V: float = 1.5


class Oxide:
    """The oxide of one part; a Branch of the circuit."""

    def __init__(self, spec: Forming) -> None:
        self.spec = spec
        self.lasting_V = max(spec.formed_V, _LEAST_V)
        self.fresh_V = 0.0
        self.crack_C = 0.0
        self._settle()

    def _settle(self) -> None:
        self.formed_V = self.lasting_V + self.fresh_V
        self._cracks = self.spec.cracks_A * exp(-self.crack_C / self.spec.cracks_C)

    def _field(self, volts: float) -> float:
        return self.spec.formed_A * float((volts / self.formed_V) ** self.spec.exponent)

    def current(self, volts: float) -> float:
        """Amperes at `volts`, positive at the anode."""
        if volts < 0.0:
            return -_REVERSE_A * float((-volts / self.spec.reverse_V) ** _REVERSE_POWER)
        return self._field(volts) + self._cracks * volts / self.formed_V

    def slope(self, volts: float) -> float:
        """Siemens at `volts`."""
        if volts < 0.0:
            return _REVERSE_POWER * self.current(volts) / volts
        if volts < 1e-6:
            return self._cracks / self.formed_V
        return self.spec.exponent * self._field(volts) / volts + self._cracks / self.formed_V

    def grow(self, volts: float, time_s: float) -> None:
        """Grow, set, relax and heal for `time_s` at `volts`."""
        spec = self.spec
        if volts > 0.0:
            if self.formed_V < spec.limit_V:
                self.fresh_V += self.current(volts) * time_s / spec.coulomb_per_V
            self.crack_C += self._cracks * volts / self.formed_V * time_s
        if volts > 0.5 * self.formed_V:
            setting = self.fresh_V * time_s / (spec.settle_s + time_s)
            self.lasting_V += setting
            self.fresh_V -= setting
        else:
            self.fresh_V *= spec.relax_s / (spec.relax_s + time_s)
        self._settle()

    def rest(self, time_s: float) -> None:
        """Lie about without voltage for `time_s`."""
        self.fresh_V *= exp(-time_s / self.spec.relax_s)
        self._settle()

    def state(self) -> list[float]:
        """What it remembers."""
        return [self.lasting_V, self.fresh_V, self.crack_C]

    def load(self, kept: list[float]) -> None:
        """Take up a remembered state."""
        self.lasting_V, self.fresh_V, self.crack_C = kept
        self._settle()
