"""Which number is what: refuse what reads in more than one way, with complete readings to choose from.

A number without a unit is only given its usual meaning when nothing else is left for it to be: a lone decimal below one beside a
voltage is microfarads. Three figures without a letter are a code only where they are the capacitance.
"""

from __future__ import annotations

from dwellbench.errors import MarkingError
from dwellbench.marking import capacitance as cap
from dwellbench.marking import tokens as t
from dwellbench.marking.words import plain


def choose(text: str, found: list[t.Token]) -> list[t.Token]:
    """Refuse what reads in more than one way; give a lone bare number its usual meaning when only one is left."""
    has_farads = any(token.what in (t.FARADS, t.SECTIONS) for token in found)
    found = _codes_or_numbers(found, has_farads)
    if has_farads:
        return found
    _refuse_kilo(text, found)
    codes = [token for token in found if token.what == t.CODE]
    if codes:
        _refuse_code(text, codes, found)
        return found
    bare = _bare(found)
    if not bare:
        return found
    if any(token.what == t.VOLTS for token in found) and len(bare) == 1 and bare[0].value < 1:
        return [_as_micro(token) if token is bare[0] else token for token in found]
    raise MarkingError(
        f"{text!r} does not say which number is what.",
        remedy="Type one of the readings, or value and volts with their units.",
        readings=_bare_readings([token.value for token in bare], found),
    )


def _bare(found: list[t.Token]) -> list[t.Token]:
    """Numbers without a unit, and without a word of their kind before them."""
    before = [None, *found]
    pairs = zip(found, before, strict=False)
    return [one for one, last in pairs if one.what == t.NUMBER_ONLY and (last is None or last.what != t.KIND)]


def _codes_or_numbers(found: list[t.Token], has_farads: bool) -> list[t.Token]:
    """Three figures without a letter are a plain number where something else is the capacitance."""
    first = next((token for token in found if token.what == t.CODE), None)
    others = has_farads or bool(_bare(found))
    made = []
    for token in found:
        lettered = token.what == t.CODE and token.value[2]
        if token.what == t.CODE and not lettered and (others or token is not first):
            token = t.Token(t.NUMBER_ONLY, token.text, float(token.text))
        made.append(token)
    return made


def _as_micro(token: t.Token) -> t.Token:
    remark = f"{token.text} has no unit; it is read as microfarads, as on parts of the valve era (common practice, no source)."
    return t.Token(t.FARADS, token.text, (cap.farads(token.value, "uF"), None, remark))


def _refuse_kilo(text: str, found: list[t.Token]) -> None:
    for token in found:
        if token.what == t.UNKNOWN and isinstance(token.value, tuple):
            value = token.value[1]
            rest = _rest(found, token)
            raise MarkingError(
                f"{token.text!r} in {text!r} may be kilo-picofarads or picofarads with 10 %.",
                remedy="Type one of the readings.",
                readings=[f"{value:g} nF{rest}", f"{value:g} pF 10%{rest}"],
            )


def _refuse_code(text: str, codes: list[t.Token], found: list[t.Token]) -> None:
    figures, power, letter = codes[0].value
    rest = _rest(found, None)
    if len(codes) > 1:
        raise MarkingError(f"{text!r} has more than one code.", remedy="Type value and unit.", readings=[])
    if cap.code_value(figures, power) is None:
        raise MarkingError(
            f"{codes[0].text!r} in {text!r} is no capacitance code: the third figure 7 is not used.",
            remedy="Type value and unit.",
            readings=[f"{figures}{power} pF{rest}"],
        )
    if power == "0" and not letter:
        raise MarkingError(
            f"{codes[0].text!r} in {text!r} may be a code ({figures} pF) or a plain value.",
            remedy="Type one of the readings.",
            readings=[f"{figures} pF{rest}", f"{figures}0 pF{rest}", f"{figures}0 uF{rest}"],
        )


def _rest(found: list[t.Token], without: t.Token | None) -> str:
    volts = [
        token
        for token in found
        if token.what == t.VOLTS and token.value[1] is None and token.value[2] is None
    ]
    return f" {volts[0].value[0]:g} V" if volts else ""


def _bare_readings(numbers: list[float], found: list[t.Token]) -> list[str]:
    """Complete markings that the bare numbers may stand for; those without sense are left out."""
    rest = _rest(found, None)
    first, *others = numbers
    if rest and others:
        return ["+".join(plain(value) for value in numbers) + f" uF{rest}"]
    if not others:
        return [f"{plain(first)} uF{rest}", f"{plain(first)} pF{rest}"]
    *middle, last = others
    if not middle:
        unit = "uF" if first < 1000 else "pF"
        readings = [f"{plain(first)} {unit} {last:g} V"]
        readings.append(f"{plain(first)} {unit} TEST {last:g} V")
        if first >= 1:
            readings.append(f"{plain(first)}+{plain(last)} uF")
        return readings
    joined = "+".join(plain(value) for value in (first, *middle))
    return [
        f"{joined} uF {last:g} V",
        f"{plain(first)} uF {min(middle[-1], last):g} V TEST {max(middle[-1], last):g} V",
    ]
