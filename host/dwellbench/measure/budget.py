"""Uncertainty budgets (JCGM 100, clause 8 and H.1): what each source adds to the standard uncertainty of a reported quantity.

The lines of a budget are independent, so their contributions add up in squares to the quantity's stated `u` exactly; a quantity
that is only a bound has no budget. Noise counts as type A with the degrees of freedom of the rows that scatter independently;
everything taken from a calibration, a data sheet or a model is type B, with none stated (infinitely many).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass, replace
from math import hypot, inf, sqrt
from typing import TYPE_CHECKING, Any

from dwellbench.measure.leakage import ABSORPTION_U, BEAT_ROWS, Leakage

if TYPE_CHECKING:
    from dwellbench.measure.estimates import Estimates


@dataclass(frozen=True)
class Line:
    """One source: its value and standard uncertainty (in `unit`), and what it does to the result.

    `sensitivity` is the derivative of the result by the source; `contribution` their product, in the result's unit. `kind` is
    "A" or "B"; `freedom` the degrees of freedom, None for infinitely many.
    """

    source: str
    unit: str
    value: float
    u: float
    sensitivity: float
    kind: str
    freedom: float | None = None

    @property
    def contribution(self) -> float:
        """What it adds, never negative."""
        return abs(self.sensitivity) * self.u

    def as_json(self) -> dict[str, Any]:
        """The line as JSON values."""
        return {**asdict(self), "contribution": self.contribution}

    def scaled(self, factor: float) -> Line:
        """The line for a result that goes as `factor` times this one."""
        return replace(self, sensitivity=self.sensitivity * factor)


Budget = tuple[Line, ...]


def combined_u(budget: Budget) -> float:
    """Standard uncertainty of the result: the root of the sum of squares (JCGM 100, equation 11a)."""
    return hypot(*(line.contribution for line in budget))


def freedom_of(budget: Budget) -> float:
    """Effective degrees of freedom of a budget (Welch and Satterthwaite, JCGM 100, G.4.1)."""
    below = sum(line.contribution**4 / line.freedom for line in budget if line.freedom)
    return combined_u(budget) ** 4 / below if below > 0.0 else inf


def budgets_of(found: Estimates) -> dict[str, Budget]:
    """The budgets of all quantities that have a standard uncertainty, by the outcome's member names."""
    made = {name: make(found) for name, make in _MAKERS.items() if _stated(found, name)}
    return {name: tuple(line for line in budget if line.contribution > 0.0) for name, budget in made.items()}


def _stated(found: Estimates, name: str) -> bool:
    quantity = getattr(found, name)
    quantity = quantity() if callable(quantity) else quantity
    return quantity is not None and quantity.u is not None


def _read(leak: Leakage, sensitivity: float) -> list[Line]:
    """The current as it was read: its noise and its zero."""
    noise_A = sqrt(max(leak.u_read_A**2 - leak.u_zero_A**2, 0.0))
    freedom = max(leak.rows / BEAT_ROWS - 1.0, 1.0)
    return [
        Line("current, scatter of the readings", "A", leak.total_A, noise_A, sensitivity, "A", freedom),
        Line("current, this run's zero", "A", leak.total_A, leak.u_zero_A, sensitivity, "B"),
    ]


def _clips(leak: Leakage, sensitivity: float) -> Line:
    return Line("leakage of the empty fixture", "A", leak.fixture_A, leak.u_fixture_A, sensitivity, "B")


def _gain(what: str, u: float, sensitivity: float) -> Line:
    return Line(f"gain of the {what}", "1", 1.0, u, sensitivity, "B")


def _total(found: Estimates) -> Budget:
    leak = found.leakage
    assert leak is not None
    return (*_read(leak, 1.0), _gain("current", found.circuit.u_gain_i, leak.total_A))


def _conduction(found: Estimates) -> Budget:
    leak = found.leakage
    assert leak is not None
    return (
        *_read(leak, 1.0),
        Line("charging, C dV/dt", "A", leak.charging_A, leak.u_charging_A, -1.0, "A", 1.0),
        _clips(leak, -1.0),
        Line("absorption, its exponent", "A", leak.absorbed_A, ABSORPTION_U * leak.absorbed_A, -1.0, "B"),
        Line("absorption, its slope", "A", leak.absorbed_A, leak.u_absorbed_A, -1.0, "A", 1.0),
        _gain("current", found.circuit.u_gain_i, leak.conduction_A),
    )


def _over_current(leak: Leakage, numerator: float) -> list[Line]:
    """The lines of numerator / (total - fixture) that come from the current."""
    through_A = leak.total_A - leak.fixture_A
    slope = -numerator / through_A**2
    return [
        *_read(leak, slope),
        _clips(leak, -slope),
        Line("charging, C dV/dt, not taken off", "A", 0.0, abs(leak.charging_A), slope, "B"),
        Line("charging, its own doubt", "A", leak.charging_A, leak.u_charging_A, slope, "A", 1.0),
    ]


def _insulation(found: Estimates) -> Budget:
    leak = found.leakage
    assert leak is not None
    ohm = leak.volts_V / (leak.total_A - leak.fixture_A)
    return (
        *_over_current(leak, leak.volts_V),
        _gain("current", found.circuit.u_gain_i, -ohm),
        _gain("voltage", found.circuit.u_gain_v, ohm),
    )


def _time_constant(found: Estimates) -> Budget:
    leak, farads = found.leakage, found.capacitance
    assert leak is not None and farads is not None
    ohm = leak.volts_V / (leak.total_A - leak.fixture_A)
    own = Line("capacitance, gains apart", "F", farads.value, farads.u_own, ohm, "B")
    return (*_over_current(leak, leak.volts_V * farads.value), own)


def _capacitance(found: Estimates) -> Budget:
    farads, circuit = found.capacitance, found.circuit
    assert farads is not None
    read_F = sqrt(max(farads.u_own**2 - found.u_absorbed_F**2, 0.0))
    gains = hypot(circuit.u_gain_i, circuit.u_gain_v)
    shared_F = farads.u_shared / gains if gains > 0.0 else 0.0
    return (
        Line(
            "charge counted and curve fitted",
            "F",
            farads.value,
            read_F,
            1.0,
            "A",
            max(farads.rows - 2.0, 1.0),
        ),
        Line("absorption in the charge", "F", 0.0, found.u_absorbed_F, 1.0, "B"),
        _gain("current", circuit.u_gain_i, shared_F),
        _gain("voltage", circuit.u_gain_v, -shared_F),
    )


def _ratio(readings: tuple[Leakage, Leakage] | None) -> Budget:
    """Later over earlier resistance, from two readings of one run; the gains cancel."""
    assert readings is not None
    early, late = readings
    ratio = (late.volts_V / late.total_A) / (early.volts_V / early.total_A)
    return (
        *(replace(line, source=f"earlier {line.source}") for line in _read(early, ratio / early.total_A)),
        *(replace(line, source=f"later {line.source}") for line in _read(late, -ratio / late.total_A)),
    )


def _recovery(found: Estimates) -> Budget:
    parts = found.recovery
    assert parts is not None
    return (
        Line("recovered voltage, zero and resolution", "%", parts.percent, parts.u_zero, 1.0, "B"),
        Line("recovered voltage, drained by the divider", "%", parts.drained, parts.u_drained, 1.0, "B"),
    )


_MAKERS: Mapping[str, Callable[[Estimates], Budget]] = {
    "capacitance_F": _capacitance,
    "total_current_A": _total,
    "leakage_A": _conduction,
    "insulation_ohm": _insulation,
    "time_constant_s": _time_constant,
    "absorption_ratio": lambda found: _ratio(found.absorption_readings),
    "polarisation_index": lambda found: _ratio(found.polarisation_readings),
    "recovery_percent": _recovery,
}
