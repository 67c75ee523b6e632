"""What is not quite as the drawing says in one box: true resistors, gains, offsets, noise, clocks; and the
box's knowledge of them.

Everything is drawn from the seed inside the tolerance that the part's data sheet or the reference box
states. A `[front_end]` table in the scenario fixes single values: its keys are the fields of `Errors`;
besides, `ideal = true` starts from a box without errors, noise, ripple or pickup instead of a drawn one,
and `calibrated = false` leaves no calibration in the box.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import Any

from dwellbench.emulator import strict
from dwellbench.emulator.dice import Dice
from dwellbench.emulator.network import Values
from dwellbench.emulator.reference import Box, box

Pair = tuple[float, float]

# Limits that the reference box does not state; from memory of what such parts are sold as.
_GAIN = 1.5e-3  # 16-bit converter, each range
_OFFSET_CODE = 3.0
_BUFFER_V = 20e-6
_DIVIDER = 5e-3
_SHUNT = 1e-3
_CHARGE = 1e-2
_REFERENCE = 1e-3


@dataclass(frozen=True)
class Errors:
    """One box as it really is. Errors are fractions of the nominal unless a unit stands in the name."""

    charge_ohm: float
    bleed_ohm: Pair
    shunts_ohm: tuple[float, float, float]
    fixture_ohm: float  # across the empty clips
    part_divider_error: float  # of the ratio: + reads high
    supply_divider_error: float
    gain_error_0: Pair  # converter 0, wide and fine range
    gain_error_1: Pair
    offset_code_0: Pair
    offset_code_1: Pair
    buffer_V: tuple[float, float, float]  # offsets of the buffers of part, supply, shunt
    noise_code: Pair  # standard deviation of one conversion, wide and fine range
    rate_error: Pair  # of each converter's clock: + is faster, its window shorter
    reference_error: Pair
    thermistor_error_K: float
    mains_Hz: float
    mains_A: float  # peak current that mains sends into the low node
    ripple_V: float  # peak, on the supply's output, at twice the mains
    supply_error: float
    drift_V_per_s: float  # most that the supply drifts
    detector_on_V: float
    detector_off_V: float
    operate_ms: float  # of every relay, coil to first touch
    release_ms: float
    bounce_ms: float  # longest
    bolt_ms: float  # travel of the lid's bolt


_POSITIVE = strict.number(above=0.0, most=1e18)
_FRACTION = strict.number(least=-0.5, most=0.5)
_ANY = strict.number(least=-1e6, most=1e6)
_CHECKS: dict[str, strict.Check] = {
    "charge_ohm": _POSITIVE,
    "bleed_ohm": strict.numbers(2, _POSITIVE),
    "shunts_ohm": strict.numbers(3, _POSITIVE),
    "fixture_ohm": _POSITIVE,
    "gain_error_0": strict.numbers(2, _FRACTION),
    "gain_error_1": strict.numbers(2, _FRACTION),
    "offset_code_0": strict.numbers(2, _ANY),
    "offset_code_1": strict.numbers(2, _ANY),
    "buffer_V": strict.numbers(3, strict.number(least=-1.0, most=1.0)),
    "noise_code": strict.numbers(2, strict.number(least=0.0, most=1e4)),
    "rate_error": strict.numbers(2, strict.number(least=-0.1, most=0.1)),
    "reference_error": strict.numbers(2, _FRACTION),
    "thermistor_error_K": _ANY,
    "mains_Hz": strict.number(least=10.0, most=400.0),
    "detector_on_V": _POSITIVE,
    "detector_off_V": _POSITIVE,
    "operate_ms": strict.number(above=0.0, most=8.0),
    "release_ms": strict.number(above=0.0, most=8.0),
    "bounce_ms": strict.number(least=0.0, most=2.0),
    "bolt_ms": strict.number(above=0.0, most=50.0),
    "part_divider_error": _FRACTION,
    "supply_divider_error": _FRACTION,
    "supply_error": _FRACTION,
    "mains_A": strict.number(least=0.0, most=1.0),
    "ripple_V": strict.number(least=0.0, most=1e3),
    "drift_V_per_s": strict.number(least=0.0, most=1e3),
}
FRONT_END_KEYS: dict[str, strict.Check] = {**_CHECKS, "ideal": strict.flag, "calibrated": strict.flag}
"""What `[front_end]` may say."""


def ideal(b: Box) -> Errors:
    """A box exactly as drawn, silent and still; relays and bolt take their usual time."""
    return Errors(
        charge_ohm=b.charge_ohm,
        bleed_ohm=b.bleed_ohm,
        shunts_ohm=b.shunts_ohm,
        fixture_ohm=1e12,
        part_divider_error=0.0,
        supply_divider_error=0.0,
        gain_error_0=(0.0, 0.0),
        gain_error_1=(0.0, 0.0),
        offset_code_0=(0.0, 0.0),
        offset_code_1=(0.0, 0.0),
        buffer_V=(0.0, 0.0, 0.0),
        noise_code=(0.0, 0.0),
        rate_error=(0.0, 0.0),
        reference_error=(0.0, 0.0),
        thermistor_error_K=0.0,
        mains_Hz=50.0,
        mains_A=0.0,
        ripple_V=0.0,
        supply_error=0.0,
        drift_V_per_s=0.0,
        detector_on_V=b.safe_V + 0.5,
        detector_off_V=b.safe_V - 0.5,
        operate_ms=4.0,
        release_ms=3.0,
        bounce_ms=1.0,
        bolt_ms=40.0,
    )


def drawn(b: Box, dice: Dice) -> Errors:
    """A box within its tolerances."""

    def near(value: float, limit: float) -> float:
        return value * (1.0 + dice.within(limit))

    def pair(limit: float) -> Pair:
        return dice.within(limit), dice.within(limit)

    bleed = _bleed_tolerance(b)
    return Errors(
        charge_ohm=near(b.charge_ohm, _CHARGE),
        bleed_ohm=(near(b.bleed_ohm[0], bleed), near(b.bleed_ohm[1], bleed)),
        shunts_ohm=(
            near(b.shunts_ohm[0], _SHUNT),
            near(b.shunts_ohm[1], _SHUNT),
            near(b.shunts_ohm[2], _SHUNT),
        ),
        fixture_ohm=1e12 * 2.0 ** dice.within(1.5),
        part_divider_error=dice.within(_DIVIDER),
        supply_divider_error=dice.within(_DIVIDER),
        gain_error_0=pair(_GAIN),
        gain_error_1=pair(_GAIN),
        offset_code_0=pair(_OFFSET_CODE),
        offset_code_1=pair(_OFFSET_CODE),
        buffer_V=(dice.within(_BUFFER_V), dice.within(_BUFFER_V), dice.within(_BUFFER_V)),
        noise_code=(dice.uniform(0.4, 0.8), dice.uniform(0.8, 1.4)),
        rate_error=pair(b.rate_tolerance),
        reference_error=pair(_REFERENCE),
        thermistor_error_K=dice.within(0.5),
        mains_Hz=50.0 + dice.within(0.2),
        mains_A=dice.uniform(5e-11, 5e-10),
        ripple_V=b.ripple_V * dice.uniform(0.2, 1.0),
        supply_error=dice.within(0.5 * b.supply_tolerance),
        drift_V_per_s=b.drift_V_per_s,
        detector_on_V=b.safe_V + dice.uniform(0.3, 2.0),
        detector_off_V=b.safe_V - dice.uniform(0.3, 2.0),
        operate_ms=dice.uniform(3.0, 7.0),
        release_ms=dice.uniform(2.0, 6.0),
        bounce_ms=dice.uniform(0.3, 2.0),
        bolt_ms=dice.uniform(20.0, 50.0),
    )


def _bleed_tolerance(b: Box) -> float:
    return 2e-2  # the reference box's tolerance of its paths


def errors(seed: int, front_end: dict[str, Any] | None) -> Errors:
    """The box of this seed, with what the scenario fixes."""
    given = dict(front_end or {})
    given.pop("calibrated", None)
    start = ideal(box()) if given.pop("ideal", False) else drawn(box(), Dice(seed, "front_end"))
    return replace(start, **given)


_DRY_PERCENT, _PER_DECADE = 45.0, 40.0


def values(e: Errors, humidity_percent: float = _DRY_PERCENT) -> Values:
    """The circuit's values for this box with nothing fitted. The empty clips leak ten times as much at 85
    % humidity as at the 45 % where the box was calibrated (from memory: surfaces, damp and not quite
    clean)."""
    b = box()
    return Values(
        charge_ohm=e.charge_ohm,
        bleed_ohm=e.bleed_ohm,
        divider_ohm=b.divider_ohm,
        supply_divider_ohm=b.divider_ohm,
        shunts_ohm=e.shunts_ohm,
        fixture_ohm=e.fixture_ohm * 10.0 ** ((_DRY_PERCENT - humidity_percent) / _PER_DECADE),
        capacitance_F=1e-12,
        esr_ohm=0.0,
        leakage_ohm=1e15,
        ladder=(),
    )


def windows_s(e: Errors) -> Pair:
    """How long each converter averages: its own idea of 1/250 s."""
    b = box()
    return 1.0 / (b.samples_per_s * (1.0 + e.rate_error[0])), 1.0 / (
        b.samples_per_s * (1.0 + e.rate_error[1])
    )


assert {f.name for f in fields(Errors)} == set(_CHECKS), "every field of Errors has its check"
