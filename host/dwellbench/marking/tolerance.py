"""What says tolerance: per cents, and the letters of IEC 60062.

The letters B, C and D are absolute and for parts below 10 pF; F and G too are absolute there (from memory). Sources disagree on
H (2.5 or 3 per cent): the wider is taken and said. GMV, guaranteed minimum value: nothing below, anything above; its upper end of
+100 % is from memory.
"""

from __future__ import annotations

import re

from dwellbench.marking.words import NUMBER, number

PERCENT = {
    "F": (-0.01, 0.01),
    "G": (-0.02, 0.02),
    "H": (-0.03, 0.03),
    "J": (-0.05, 0.05),
    "K": (-0.10, 0.10),
    "M": (-0.20, 0.20),
    "N": (-0.30, 0.30),
    "Z": (-0.20, 0.80),
}
ABSOLUTE_F = {"B": 0.1e-12, "C": 0.25e-12, "D": 0.5e-12, "F": 1e-12, "G": 2e-12}
SMALL_F = 10e-12

EVEN = re.compile(rf"(?:\u00b1|\+ ?/ ?-|\+-) ?(?P<both>{NUMBER}) ?%|(?P<bare>{NUMBER}) ?%")
SKEW = re.compile(
    rf"(?P<one_sign>[+-]) ?(?P<one>{NUMBER}) ?%? ?[/ ]? ?(?P<two_sign>[+-]) ?(?P<two>{NUMBER}) ?%"
)
GMV = re.compile(r"GMV\b", re.IGNORECASE)


def of_letter(letter: str, farads: float) -> tuple[tuple[float, float], str | None]:
    """Return the tolerance of a letter as fractions, and the sentence it needs."""
    letter = letter.upper()
    if farads < SMALL_F and letter in ABSOLUTE_F:
        share = ABSOLUTE_F[letter] / farads
        return (
            -share,
            share,
        ), f"{letter} is an absolute tolerance below 10 pF: {ABSOLUTE_F[letter] * 1e12:g} pF."
    if letter not in PERCENT:
        share = ABSOLUTE_F[letter] / farads
        return (
            -share,
            share,
        ), f"{letter} is a tolerance for parts below 10 pF; it is taken as {ABSOLUTE_F[letter] * 1e12:g} pF."
    remark = "Sources give H as 2.5 or 3 %; the wider is taken." if letter == "H" else None
    return PERCENT[letter], remark


def of_skew(match: re.Match[str]) -> tuple[float, float]:
    """Return the tolerance of "+80 -20 %" in either order."""
    ends = [
        float(f"{match[sign]}{number(match[size])}") / 100
        for sign, size in (("one_sign", "one"), ("two_sign", "two"))
    ]
    return min(ends), max(ends)
