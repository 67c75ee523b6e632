"""The empty fixture: what it leaks at a voltage, when that was measured, and how long it is believed.

Its insulation is surface film and humidity, so it is taken at the test's own voltage and believed for a day (common practice,
no source). An older zero, or one of another voltage, still says more than nothing: its doubt is then at least that of a fixture
that was never measured.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from math import hypot
from typing import TYPE_CHECKING, Any

from dwellbench.errors import UsageError
from dwellbench.measure.reference import FIXTURE_U_REL

if TYPE_CHECKING:
    from dwellbench.measure.leakage import Leakage

VALID_H = 24.0
SAME_VOLTS = 0.1
"""Voltages within a tenth of each other count as the same."""

_LEAST_OHM = 1e9
_MOST = 8  # documents are written to the box in pages; eight voltages are more than a bench uses
_CLEAN = "Take out what is fitted, clean and dry the clips, then measure the empty fixture again."


@dataclass(frozen=True)
class Zero:
    """Insulation `ohm` of the empty fixture at `volts_V`, with its relative standard uncertainty."""

    volts_V: float
    ohm: float
    u_rel: float
    made_utc: str
    valid_h: float = VALID_H
    temperature_C: float | None = None
    humidity_percent: float | None = None

    @classmethod
    def from_json(cls, data: Mapping[str, Any]) -> Zero:
        """Read one of a calibration's `zeros`. Raises ValueError, KeyError or TypeError for what is not one."""
        optional = {key: _number(data.get(key)) for key in ("temperature_C", "humidity_percent")}
        volts_V, ohm, u_rel = float(data["volts_V"]), float(data["ohm"]), float(data["u_rel"])
        if not (volts_V > 0.0 and ohm > 0.0 and u_rel >= 0.0):
            raise ValueError("a zero of the fixture is not positive")
        return cls(
            volts_V, ohm, u_rel, str(data["made_utc"]), float(data.get("valid_h", VALID_H)), **optional
        )

    def as_json(self) -> dict[str, Any]:
        """What `from_json` reads."""
        return asdict(self)

    def same_volts(self, volts_V: float) -> bool:
        """Whether it was made at that voltage."""
        return abs(self.volts_V - volts_V) <= SAME_VOLTS * volts_V

    def u_rel_when(self, holds: bool) -> float:
        """Its doubt: as measured while it holds, else at least that of a fixture never measured."""
        return self.u_rel if holds else max(self.u_rel, FIXTURE_U_REL)


def _number(value: Any) -> float | None:
    return None if value is None else float(value)


def zero_of(
    leak: Leakage | None,
    u_gain: float,
    *,
    made_utc: str,
    temperature_C: float | None = None,
    humidity_percent: float | None = None,
    valid_h: float = VALID_H,
) -> Zero:
    """The fixture's insulation from the reading at the end of a run on empty clips.

    Where the current does not stand out of its doubt, the insulation is what that doubt would be, wholly in doubt: it is at
    least so good. Raises UsageError when nothing was read, or when what was read is no clean, empty fixture.
    """
    if leak is None:
        raise UsageError(
            "The empty fixture's current was not read.", remedy="Hold the voltage longer, with --dwell 30."
        )
    through_A = leak.total_A - leak.charging_A
    u_A = hypot(leak.u_read_A, leak.u_charging_A, through_A * u_gain)
    shown_A = max(through_A, u_A)
    ohm = leak.volts_V / shown_A
    if ohm < _LEAST_OHM:
        raise UsageError(
            f"What is between the clips insulates {ohm / 1e6:.3g} Mohm only; it is not a clean, empty fixture.",
            remedy=_CLEAN,
        )
    volts_V, u_rel = round(leak.volts_V, 2), round(u_A / shown_A, 6)
    return Zero(volts_V, float(f"{ohm:.6g}"), u_rel, made_utc, valid_h, temperature_C, humidity_percent)


def nearest(zeros: tuple[Zero, ...], volts_V: float | None) -> Zero | None:
    """The zero made closest to a voltage, the latest of several; the latest of all when no voltage is known."""
    if not zeros:
        return None
    latest = sorted(zeros, key=lambda zero: zero.made_utc, reverse=True)
    if volts_V is None:
        return latest[0]
    return min(latest, key=lambda zero: 0.0 if zero.same_volts(volts_V) else abs(zero.volts_V - volts_V))


def with_zero(document: Mapping[str, Any] | None, box: str, zero: Zero) -> dict[str, Any]:
    """A box's calibration document with this zero in it, in place of the one at the same voltage.

    A box that has no calibration keeps its zeros alone (`id` nominal, no scales).
    """
    kept: dict[str, Any] = dict(document) if document else {"schema": 1, "id": "nominal", "box": box}
    others = [other for other in kept.get("zeros", []) if not zero.same_volts(float(other["volts_V"]))]
    newest = sorted([*others, zero.as_json()], key=lambda other: str(other["made_utc"]))
    return {**kept, "zeros": newest[-_MOST:]}
