"""From node volts to codes, and the calibration that a box keeps of it.

A code is gain * (node volts / ratio * (1 + divider error) + buffer offset) / step + converter offset +
noise, rounded and clipped to 16 bits. Noise of a conversion is white; the converter's own averaging is in
the circuit's window means.
"""

from __future__ import annotations

from math import exp
from typing import Any, NamedTuple

from dwellbench.emulator.dice import TABLE_SIZE, Dice, noise_table
from dwellbench.emulator.front_end import Errors
from dwellbench.emulator.reference import box, channels

_FULL = 32768.0
_MASK = TABLE_SIZE - 1
_PART, _SUPPLY, _SHUNT = (channels()[name] for name in ("part", "supply", "shunt"))
_KELVIN = 273.15


class Line(NamedTuple):
    """codes = volts * scale + offset, standard deviation `noise` (codes). Volts of the node, or of the
    converter's input."""

    scale: float
    offset: float
    noise: float


def lines(e: Errors) -> tuple[dict[int, Line], dict[int, Line]]:
    """For each converter, the lines of its conversions by channel * 2 + range."""
    ratio, number = box().divider_ratio, channels()
    sources = {
        "part": (0, (1.0 + e.part_divider_error) / ratio, e.buffer_V[0]),
        "supply": (0, (1.0 + e.supply_divider_error) / ratio, e.buffer_V[1]),
        "thermistor": (0, 1.0, 0.0),
        "reference_a": (0, 1.0, 0.0),
        "shunt": (1, 1.0, e.buffer_V[2]),
        "reference_b": (1, 1.0, 0.0),
    }
    made: tuple[dict[int, Line], dict[int, Line]] = ({}, {})
    for name, (unit, factor, offset_V) in sources.items():
        gains = (e.gain_error_0, e.gain_error_1)[unit]
        offsets = (e.offset_code_0, e.offset_code_1)[unit]
        for k, full_V in enumerate(box().ranges_V):
            per_volt = (1.0 + gains[k]) * _FULL / full_V
            line = Line(factor * per_volt, offset_V * per_volt + offsets[k], e.noise_code[k])
            made[unit][number[name] * 2 + k] = line
    return made


def thermistor_V(celsius: float) -> float:
    """Volts of the divider of pull-up and thermistor (B equation)."""
    b = box()
    ohm = b.thermistor_r25_ohm * exp(b.thermistor_b_K * (1.0 / (celsius + _KELVIN) - 1.0 / (25.0 + _KELVIN)))
    return b.thermistor_feed_V * ohm / (ohm + b.thermistor_pull_ohm)


def static_volts(e: Errors, celsius: float) -> dict[str, float]:
    """Volts of the inputs that do not belong to the circuit."""
    reference = box().reference_V
    return {
        "thermistor": thermistor_V(celsius + e.thermistor_error_K),
        "reference_a": reference * (1.0 + e.reference_error[0]),
        "reference_b": reference * (1.0 + e.reference_error[1]),
    }


class Chips:
    """Both converters: `first` and `second` give the code of one conversion.

    Noise walks a fixed table from a place and in a stride that are drawn anew ten times a second: cheap,
    and the same everywhere.
    """

    def __init__(self, e: Errors, celsius: float, chance: Dice) -> None:
        self.lines = lines(e)
        self.static_V = {channels()[name]: volts for name, volts in static_volts(e, celsius).items()}
        self._chance, self._table = chance, noise_table()
        self.at = self.stride = 1
        self.stir()

    def stir(self) -> None:
        """Go on at another place of the noise table, in another stride."""
        self.at = self._chance.bits() & _MASK
        self.stride = self._chance.bits() & _MASK | 1

    def first(self, conversion: int, high_V: float, supply_V: float) -> int:
        """Code of converter 0 for channel * 2 + range. KeyError for a channel it does not have."""
        scale, offset, noise = self.lines[0][conversion]
        channel = conversion >> 1
        volts = high_V if channel == _PART else supply_V if channel == _SUPPLY else self.static_V[channel]
        self.at = at = (self.at + self.stride) & _MASK
        code = volts * scale + offset + noise * self._table[at]
        return -32768 if code < -32768.0 else 32767 if code > 32767.0 else int(code + 32768.5) - 32768

    def second(self, conversion: int, low_V: float) -> int:
        """Code of converter 1, likewise."""
        scale, offset, noise = self.lines[1][conversion]
        channel = conversion >> 1
        volts = low_V if channel == _SHUNT else self.static_V[channel]
        self.at = at = (self.at + self.stride) & _MASK
        code = volts * scale + offset + noise * self._table[at]
        return -32768 if code < -32768.0 else 32767 if code > 32767.0 else int(code + 32768.5) - 32768


_U_REL = 1e-3
_U_OFFSET_CODE = 0.5


def calibration(e: Errors, seed: int, unique_id: str, ambient_C: float) -> dict[str, Any]:
    """What a careful owner's calibration of this box found: the truth, off by as much as its stated
    uncertainty says."""
    dice = Dice(seed, "calibration")
    first, second = lines(e)
    number, ranges = channels(), box().ranges_V

    def volts(name: str) -> list[dict[str, float]]:
        rows = [first[number[name] * 2 + k] for k in range(2)]
        return [
            {
                "range_mv": round(ranges[k] * 1e3),
                "per_code": (1.0 + dice.normal(_U_REL)) / row.scale,
                "offset_code": row.offset + dice.normal(_U_OFFSET_CODE),
                "u_rel": _U_REL,
                "u_offset_code": _U_OFFSET_CODE,
            }
            for k, row in enumerate(rows)
        ]

    amps = [
        {
            "shunt_ohm": round(nominal),
            "range_mv": round(ranges[k] * 1e3),
            "per_code": (1.0 + dice.normal(_U_REL)) / (second[number["shunt"] * 2 + k].scale * true),
            "u_rel": _U_REL,
        }
        for nominal, true in zip(box().shunts_ohm, e.shunts_ohm, strict=True)
        for k in range(2)
    ]
    return {
        "schema": 1,
        "id": f"{Dice(seed, 'calibration id').bits() >> 32:08x}",
        "box": unique_id,
        "made_utc": "2026-01-05T10:00:00Z",
        "valid_days": None,  # an emulated box does not drift with the calendar
        "temperature_C": ambient_C,
        "volts": volts("part"),
        "supply": volts("supply"),
        "amps": amps,
        "fixture_ohm": e.fixture_ohm * 2.0 ** dice.within(1.0),
        "u_fixture_rel": 0.5,
    }
