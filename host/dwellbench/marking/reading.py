"""Tokens put together into one reading of a marking, or refused with the readings to choose from.

What is refused rather than guessed: numbers without any unit (`.05/600`, `50/50/275`), a code that may be a plain value (`220`), a
letter K that may be kilo (`10K 400V`), more than one capacitance. A test or surge voltage is never taken as the rating; an AC
rating is kept apart and never turned into DC.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from dwellbench.errors import MarkingError
from dwellbench.marking import capacitance as cap
from dwellbench.marking import tokens as t
from dwellbench.marking import tolerance, voltage
from dwellbench.marking.choosing import choose
from dwellbench.marking.words import plain


@dataclass
class Reading:
    """What was understood so far. Farads, volts, fractions."""

    text: str
    farads: float | None = None
    sections: list[float] = field(default_factory=list)
    tolerance: tuple[float, float] | None = None
    rated_V: float | None = None
    test_V: float | None = None
    ac_V: float | None = None
    dielectric: str | None = None
    polar: bool | None = None
    symbols: list[str] = field(default_factory=list)
    understood: list[str] = field(default_factory=list)
    doubts: list[str] = field(default_factory=list)


def read(text: str) -> Reading:
    """Return the one reading of a marking without `+` between parts of their own volts. Raises MarkingError."""
    reading = Reading(text)
    found = t.tokens(text)
    found = choose(text, found)
    pending: str | None = None
    for token in found:
        if token.what == t.KIND:
            pending = token.value
        elif token.what == t.VOLTS:
            first, second, kind = token.value
            _take_volts(reading, token.text, first, second, kind or pending)
            pending = None
        elif token.what == t.NUMBER_ONLY and pending:
            _take_volts(reading, token.text, token.value, None, pending)
            pending = None
        else:
            _take(reading, token)
    _finish(reading)
    return reading


def _take(reading: Reading, token: t.Token) -> None:
    if token.what == t.FARADS:
        farads, letter, remark = token.value
        _take_farads(reading, token.text, farads, letter, remark)
    elif token.what == t.CODE:
        figures, power, letter = token.value
        _take_farads(reading, token.text, cap.code_value(figures, power) or 0.0, letter, None)
    elif token.what == t.SECTIONS:
        values, unit, symbols = token.value
        reading.symbols.extend(symbols)
        _take_sections(reading, token.text, values, cap.unit_remark(unit))
    elif token.what == t.TOLERANCE:
        reading.tolerance = token.value
        reading.understood.append(f"{token.text}: tolerance {_percent(token.value)}.")
    elif token.what == t.LETTER:
        _take_letter(reading, token.value)
    elif token.what == t.WORD:
        _take_word(reading, token)
    elif token.what == t.SYMBOL:
        reading.symbols.append(token.text)
    elif token.what == t.NUMBER_ONLY:
        _take_number(reading, token)
    elif token.what != t.PLUS:
        reading.doubts.append(f"{token.text!r} was not understood.")


def _take_farads(reading: Reading, text: str, farads: float, letter: str | None, remark: str | None) -> None:
    if reading.farads is not None or reading.sections:
        raise MarkingError(
            f"{reading.text!r} states more than one capacitance.",
            remedy="For a can of several sections join them with +, as in 40+20 uF 450V.",
            readings=[],
        )
    if farads <= 0:
        raise MarkingError(
            f"{text!r} in {reading.text!r} is no capacitance.", remedy="Type it with its unit.", readings=[]
        )
    reading.farads = farads
    reading.understood.append(f"{text}: {said(farads)}.")
    if remark:
        reading.understood.append(remark)
    if letter:
        _take_letter(reading, letter)


def _take_sections(reading: Reading, text: str, values: list[float], remark: str | None) -> None:
    if reading.farads is not None or reading.sections:
        _take_farads(reading, text, values[0], None, None)
    if any(value <= 0 for value in values):
        raise MarkingError(f"{text!r} is no capacitance.", remedy="Type each section's value.", readings=[])
    reading.sections = values
    reading.understood.append(
        f"{text}: {len(values)} sections, {' and '.join(said(value) for value in values)}."
    )
    if remark:
        reading.understood.append(remark)


def _take_letter(reading: Reading, letter: str) -> None:
    value, remark = tolerance.of_letter(letter, reading.farads or 1e-6)
    reading.tolerance = value
    reading.understood.append(f"{letter.upper()}: tolerance {_percent(value)}.")
    if remark:
        reading.doubts.append(remark)


def _take_word(reading: Reading, token: t.Token) -> None:
    kind = token.value
    if kind.dielectric:
        if reading.dielectric not in (None, "film", kind.dielectric) and kind.dielectric != "film":
            reading.doubts.append(
                f"Both {reading.dielectric} and {kind.dielectric} are named; {kind.dielectric} is taken."
            )
        if reading.dielectric is None or kind.dielectric != "film":
            reading.dielectric = kind.dielectric
    if kind.polar is not None and reading.polar is not False:
        reading.polar = kind.polar
    if kind.polar is False and reading.dielectric is None:
        reading.dielectric = "electrolytic"
    if kind.remark:
        reading.doubts.append(kind.remark)
    reading.understood.append(f"{token.text}: {_implied(kind)}.")


def _implied(kind: object) -> str:
    dielectric = getattr(kind, "dielectric", None)
    polar = getattr(kind, "polar", None)
    if dielectric:
        return str(dielectric).replace("_", " class ")
    return "not polar" if polar is False else "a safety class"


def _take_number(reading: Reading, token: t.Token) -> None:
    """A number without a unit: volts when the capacitance is known and no volts are, else a doubt."""
    has_farads = reading.farads is not None or bool(reading.sections)
    if has_farads and reading.rated_V is None and reading.ac_V is None and token.value >= 3:
        _take_volts(reading, token.text, token.value, None, None)
        reading.doubts.append(f"{token.text} has no unit; it is taken as volts.")
    else:
        reading.doubts.append(f"{token.text!r} was not understood.")


def _take_volts(reading: Reading, text: str, first: float, second: float | None, kind: str | None) -> None:
    if first <= 0 or (second is not None and second <= 0):
        raise MarkingError(
            f"{text!r} in {reading.text!r} is no voltage.", remedy="Type the working voltage.", readings=[]
        )
    if second is not None:
        _take_pair(reading, text, first, second, kind)
    elif kind == voltage.AC:
        reading.ac_V = first
        reading.understood.append(f"{text}: {first:g} V alternating; it is not turned into a DC rating.")
    elif kind == voltage.TEST:
        reading.test_V = max(first, reading.test_V or 0.0)
        reading.understood.append(f"{text}: {first:g} V is a test or surge voltage, not the rating.")
    elif reading.rated_V is None:
        reading.rated_V = first
        reading.understood.append(f"{text}: rated {first:g} V DC.")
    elif reading.rated_V != first:
        _second_rating(reading, text, first)


def _take_pair(reading: Reading, text: str, first: float, second: float, kind: str | None) -> None:
    """250/750 V: a rating and its test voltage."""
    low, high = min(first, second), max(first, second)
    if kind == voltage.AC or low == high:
        readings = (
            [f"{_head(reading)} {low:g} VAC"] if kind == voltage.AC else [f"{_head(reading)} {low:g} V"]
        )
        raise MarkingError(
            f"{text!r} can mean more than one thing.", remedy="Type the rating alone.", readings=readings
        )
    reading.rated_V = low
    reading.test_V = max(high, reading.test_V or 0.0)
    reading.understood.append(f"{text}: rated {low:g} V DC, tested at {high:g} V by its maker.")


def _second_rating(reading: Reading, text: str, volts: float) -> None:
    rated = reading.rated_V or 0.0
    low, high = min(rated, volts), max(rated, volts)
    raise MarkingError(
        f"{reading.text!r} states two voltages, {rated:g} V and {volts:g} V, without saying which is the rating.",
        remedy="Type one of the readings, or the rating alone.",
        readings=[f"{_head(reading)} {low:g} V TEST {high:g} V", f"{_head(reading)} {high:g} V"],
    )


def _head(reading: Reading) -> str:
    if reading.sections:
        return "+".join(plain(value * 1e6) for value in reading.sections) + " uF"
    return said(reading.farads) if reading.farads else "0.1 uF"


def _finish(reading: Reading) -> None:
    if reading.farads is None and not reading.sections:
        raise MarkingError(
            f"No capacitance can be read in {reading.text!r}." if reading.text else "The marking is empty.",
            remedy="Type value and unit, then volts and kind, as in: 47n 630V film.",
            readings=[],
        )
    rated, test = reading.rated_V, reading.test_V
    if rated is not None and test is not None and test < rated:
        raise MarkingError(
            f"{reading.text!r} reads as a test voltage of {test:g} V below a rating of {rated:g} V, which cannot be.",
            remedy="Type the reading that is meant, or the rating alone.",
            readings=[f"{_head(reading)} {test:g} V TEST {rated:g} V"],
        )
    if reading.dielectric is None and reading.polar is None:
        reading.doubts.append("No dielectric is marked; limits for the kind cannot be chosen.")


def _percent(value: tuple[float, float]) -> str:
    low, high = value
    if -low == high:
        return f"\u00b1{high * 100:g} %"
    return f"{low * 100:+g} to {high * 100:+g} %"


def said(farads: float) -> str:
    """Return farads in the unit people use for the size."""
    for unit, scale in (("uF", 1e-6), ("nF", 1e-9), ("pF", 1e-12)):
        if farads >= scale * 0.9995:
            return f"{plain(float(f'{farads / scale:.6g}'))} {unit}"
    return f"{plain(float(f'{farads / 1e-12:.6g}'))} pF"
