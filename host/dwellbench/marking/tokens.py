"""The whole text cut into what it says. At each place the first pattern that matches is taken; the order is the meaning.

A token keeps its text, so that a sentence can say what was made of which letters.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

from dwellbench.marking import capacitance as cap
from dwellbench.marking import dielectric, tolerance, voltage
from dwellbench.marking.words import NUMBER, number

FARADS, SECTIONS, CODE, VOLTS, KIND, TOLERANCE, LETTER, WORD, NUMBER_ONLY, PLUS, SYMBOL, UNKNOWN = range(12)


@dataclass(frozen=True)
class Token:
    """`what` is one of the constants above; `value` depends on it."""

    what: int
    text: str
    value: Any = None


_SECTION_UNIT = "|".join(
    sorted((re.escape(u) for u in cap.UNITS if u not in ("f", "n", "p")), key=len, reverse=True)
)
_SECTIONS = re.compile(
    rf"(?P<values>{NUMBER}(?: ?[+/x&-] ?{NUMBER})+) ?x? ?(?P<unit>{_SECTION_UNIT})(?![A-Za-z0-9])",
    re.IGNORECASE,
)
_VOLT_CODE = re.compile(r"(?P<code>[0-3][A-Z])(?=\d{3}[A-Z]?(?![A-Za-z0-9])|(?![A-Za-z0-9]))")
_SIGN = r"(?:[\u25a0\u25a1\u25aa\u25b2\u25b3\u25cf\u25cb\u25d0-\u25d7]|(?:square|triangle|half[ -]?moon|circle)\b)"
_SYMBOL = re.compile(_SIGN, re.IGNORECASE)
_SYMBOLED = re.compile(
    rf"(?P<values>{_SIGN} ?{NUMBER}(?: ?[,;+]? ?{_SIGN} ?{NUMBER})+) ?(?P<unit>{_SECTION_UNIT})(?![A-Za-z0-9])",
    re.IGNORECASE,
)
_TIMES = re.compile(
    rf"(?P<times>[2-4]) ?x ?(?P<number>{NUMBER}) ?(?P<unit>{_SECTION_UNIT})(?![A-Za-z0-9])", re.IGNORECASE
)
_LEAST_PAIR_V = 3.0  # nothing is rated below
_MOST_RATIO = 6.0  # a test voltage is two to four times the rating, never ten times
_LETTER = re.compile(r"(?P<letter>[BCDFGHJKMNZ])(?![A-Za-z0-9.])")
_NUMBER = re.compile(rf"(?P<number>{NUMBER})(?![A-Za-z0-9])")
_KILO = re.compile(r"(?P<number>\d{1,2}) ?[kK](?![A-Za-z0-9])")
_NUMBER_FOLLOWS = re.compile(rf"[ :=]*{NUMBER}")
_FILLER = re.compile(
    r"(?:capacitor|cap|condenser|kondensator|kapazit\u00e4t|axial|radial|tubular|moulded|molded|can|nos|type)\b\.?",
    re.I,
)
_ANY = re.compile(r"[^\s,;/()]+|[/,;()]")


def tokens(text: str) -> list[Token]:
    """Cut a uniform text into tokens."""
    found: list[Token] = []
    at = 0
    while at < len(text):
        if text[at] in " ,;()" or (text[at] == "/" and found):
            at += 1
            continue
        token, length = _next(text, at, found)
        if token is not None:
            found.append(token)
        at += length
    return found


def _next(text: str, at: int, before: list[Token]) -> tuple[Token | None, int]:
    for pattern, make in _ORDER:
        match = pattern.match(text, at)
        if match and match.end() > at:
            made = make(match, before)
            if isinstance(made, tuple):  # only a part of what matched
                return made[0], made[1] - at
            if made is not False:
                return made, match.end() - at
    match = _ANY.match(text, at)
    assert match is not None
    return Token(UNKNOWN, match.group()), match.end() - at


def _skew(match: re.Match[str], _: list[Token]) -> Token:
    return Token(TOLERANCE, match.group(), tolerance.of_skew(match))


def _even(match: re.Match[str], _: list[Token]) -> Token:
    share = number(match["both"] or match["bare"]) / 100
    return Token(TOLERANCE, match.group(), (-share, share))


def _gmv(match: re.Match[str], _: list[Token]) -> Token:
    return Token(TOLERANCE, match.group(), (0.0, 1.0))


def _sections(match: re.Match[str], _: list[Token]) -> Token | bool:
    parts = re.findall(NUMBER, match["values"])
    values = [cap.farads(number(part), match["unit"]) for part in parts]
    # 250/750 mF would be volts before a unit that is not theirs; sections are whole, and few
    if len(values) > 5 or "x" in match["values"].lower():
        return False
    return Token(SECTIONS, match.group(), (values, match["unit"], []))


def _symboled(match: re.Match[str], _: list[Token]) -> Token:
    pairs = re.findall(rf"({_SIGN}) ?({NUMBER})", match["values"], re.IGNORECASE)
    values = [cap.farads(number(value), match["unit"]) for _, value in pairs]
    return Token(SECTIONS, match.group(), (values, match["unit"], [sign for sign, _ in pairs]))


def _times(match: re.Match[str], _: list[Token]) -> Token:
    value = cap.farads(number(match["number"]), match["unit"])
    return Token(SECTIONS, match.group(), ([value] * int(match["times"]), match["unit"], []))


def _value(match: re.Match[str], _: list[Token]) -> Token:
    farads = cap.farads(number(match["number"]), match["unit"])
    return Token(FARADS, match.group(), (farads, match["letter"], cap.unit_remark(match["unit"])))


def _letter_value(match: re.Match[str], _: list[Token]) -> Token:
    farads = cap.letter_value(match["whole"], match["unit"], match["part"])
    return Token(FARADS, match.group(), (farads, match["letter"], None))


def _volts(match: re.Match[str], before: list[Token]) -> Token | tuple[Token, int]:
    """A word of kind behind the number belongs to it, unless one stands before: TEST 1500 V WKG 500."""
    thousand = 1000.0 if (match["unit"] or "").lower().startswith("k") else 1.0
    first = number(match["first"]) * thousand
    second = number(match["second"]) * thousand if match["second"] else None
    if second is not None and (
        first < _LEAST_PAIR_V or max(first, second) > _MOST_RATIO * min(first, second)
    ):
        end = match.end("first")  # .1/400V: the first is no voltage
        return Token(NUMBER_ONLY, match["first"], number(match["first"])), end
    word = match["kind"] or match["bare"]
    if before and before[-1].what == KIND:
        end = match.end("unit") if match["unit"] else match.end("second" if match["second"] else "first")
        return Token(VOLTS, match.string[match.start() : end], (first, second, None)), end
    kind = voltage.kind_of(word) if word else None
    if kind == voltage.TEST and match["unit"] and _NUMBER_FOLLOWS.match(match.string, match.end()):
        end = match.end("unit")  # 250V TEST 750: the word belongs to what follows
        return Token(VOLTS, match.string[match.start() : end], (first, second, None)), end
    if (match["sign"] or "").strip() == "~":
        kind = voltage.AC
    return Token(VOLTS, match.group(), (first, second, kind))


def _kind(match: re.Match[str], _: list[Token]) -> Token:
    return Token(KIND, match.group(), voltage.kind_of(match["word"]))


def _volt_code(match: re.Match[str], _: list[Token]) -> Token | bool:
    volts = voltage.CODES.get(match["code"])
    return False if volts is None else Token(VOLTS, match.group(), (volts, None, "code"))


def _code(match: re.Match[str], before: list[Token]) -> Token | bool:
    if before and before[-1].what == KIND:
        return False  # WKG 500: volts
    return Token(CODE, match.group(), (match["figures"], match["power"], match["letter"]))


def _dielectric(match: re.Match[str], _: list[Token]) -> Token:
    return Token(WORD, match.group(), dielectric.kind_of(match["kind"]))


def _symbol(match: re.Match[str], _: list[Token]) -> Token:
    return Token(SYMBOL, match.group())


def _plus(match: re.Match[str], _: list[Token]) -> Token:
    return Token(PLUS, match.group())


def _tolerance_letter(match: re.Match[str], before: list[Token]) -> Token | bool:
    return Token(LETTER, match.group(), match["letter"]) if before else False


def _number(match: re.Match[str], _: list[Token]) -> Token:
    return Token(NUMBER_ONLY, match.group(), number(match["number"]))


def _kilo(match: re.Match[str], _: list[Token]) -> Token:
    return Token(UNKNOWN, match.group(), ("kilo", number(match["number"])))


def _nothing(match: re.Match[str], _: list[Token]) -> None:
    return None


_ORDER: tuple[tuple[re.Pattern[str], Any], ...] = (
    (tolerance.SKEW, _skew),
    (tolerance.EVEN, _even),
    (tolerance.GMV, _gmv),
    (_SYMBOLED, _symboled),
    (_TIMES, _times),
    (_SECTIONS, _sections),
    (_VOLT_CODE, _volt_code),
    (voltage.VOLTS, _volts),
    (cap.VALUE, _value),
    (cap.LETTER, _letter_value),
    (cap.CODE, _code),
    (_KILO, _kilo),
    (voltage.WORD, _kind),
    (dielectric.WORD, _dielectric),
    (_SYMBOL, _symbol),
    (_FILLER, _nothing),
    (_LETTER, _tolerance_letter),
    (_NUMBER, _number),
    (re.compile(r"\+"), _plus),
)
