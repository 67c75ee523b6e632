"""What says farads on a part.

Sources: IEC 60062 (letter in place of the decimal point; three-figure code is common practice, its digits 8 and 9 as x0.01 and
x0.1 in published decoder tables). mmfd, uuF, MFD and the like: period practice. 1 cm = 1.11 pF (the CGS unit; from memory).
"""

from __future__ import annotations

import re

from dwellbench.marking.words import NUMBER, number

PICO, NANO, MICRO, MILLI = 1e-12, 1e-9, 1e-6, 1e-3
CM = 1.11e-12

# Units by their spelling in lower case, longest first when matched. What stands for "micro" on old parts is read as micro.
UNITS = {
    "\u00b5\u00b5fd": PICO,
    "\u00b5\u00b5f": PICO,
    "uufd": PICO,
    "uuf": PICO,
    "mmfd": PICO,
    "mmf": PICO,
    "kpf": NANO,
    "pfd": PICO,
    "pf": PICO,
    "nfd": NANO,
    "nf": NANO,
    "\u00b5fd": MICRO,
    "\u00b5f": MICRO,
    "ufd": MICRO,
    "uf": MICRO,
    "mfds": MICRO,
    "mfd": MICRO,
    "mf": MICRO,
    "mikrof": MICRO,
    "cm": CM,
    "\u00b5": MICRO,
    "u": MICRO,
    "n": NANO,
    "p": PICO,
    "f": 1.0,
}
_UNIT = "|".join(sorted((re.escape(unit) for unit in UNITS), key=len, reverse=True))

VALUE = re.compile(
    rf"(?P<number>{NUMBER}) ?(?P<unit>{_UNIT})(?P<letter>[FGHJKMZ])?(?![a-z0-9\u00b5])", re.IGNORECASE
)
"""A number with its unit, perhaps with a tolerance letter behind it (47nJ)."""

LETTER = re.compile(
    r"(?P<whole>\d{0,3})(?P<unit>[pnuR\u00b5m])(?P<part>\d{1,2})(?P<letter>[BCDFGHJKMZ])?(?![A-Za-z0-9])",
    re.IGNORECASE,
)
"""IEC 60062: the unit's letter stands where the decimal point would (4n7, 2p2, R47)."""

CODE = re.compile(
    r"(?P<figures>[1-9]\d)(?P<power>\d)(?: ?(?P<letter>[BCDFGHJKMZ])(?![A-Za-z]))?"
    r"(?=$|[^A-Za-z0-9.,]|(?<=[BCDFGHJKMZ])\d{1,4} ?(?:[kK]?[vV]|\b))"
)
"""Two figures and a power of ten in picofarads, perhaps with a tolerance letter (473K)."""

_LETTERS = {"p": PICO, "n": NANO, "u": MICRO, "\u00b5": MICRO, "r": PICO, "m": MICRO}
_POWERS = {8: -2, 9: -1}


def farads(value: float, spelling: str) -> float:
    """Return farads of a value with its unit, rounded to what can have been written."""
    return float(f"{value * UNITS[spelling.lower()]:.9g}")


def unit_remark(spelling: str) -> str | None:
    """Return the sentence that a spelling needs, if it does."""
    if spelling in ("MF", "mF", "mf", "Mf", "MFD", "mfd", "Mfd"):
        return f"{spelling} is read as microfarads, as on parts of the valve era."
    if spelling.lower() == "cm":
        return "cm is the old unit of capacitance, 1.11 pF (from memory)."
    return None


def letter_value(whole: str, unit: str, part: str) -> float:
    """Return farads of 4n7 and the like."""
    return float(f"{number(f'{whole or 0}.{part}') * _LETTERS[unit.lower()]:.9g}")


def code_value(figures: str, power: str) -> float | None:
    """Return farads of a three-digit code; None for the power 7, which is not used."""
    digit = int(power)
    if digit == 7:
        return None
    exponent = _POWERS.get(digit, digit)
    return float(f"{figures}e{exponent - 12}")
