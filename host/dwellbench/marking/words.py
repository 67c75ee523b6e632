"""The text of a marking made uniform: one micro sign, one minus, plain spaces; and the numbers in it."""

from __future__ import annotations

import re
import unicodedata

# A number as the trade writes it: 0.1, .1, 0,1, ,1, 47. A comma stands for the decimal point when a digit follows at once.
NUMBER = r"(?:\d+(?:[.,]\d+)?|[.,]\d+)"

_SAME = {
    "\u03bc": "\u00b5",  # Greek small mu -> micro sign
    "\u2212": "-",
    "\u2013": "-",
    "\u2014": "-",
    "\u00d7": "x",
    "\u2126": "ohm",
    "\u03a9": "ohm",
    "\u223c": "~",
    "\u2a72": "=",
}


def uniform(text: str) -> str:
    """Return the text with compatible letters folded (full-width digits and the like), spaces single, ends trimmed."""
    folded = "".join(
        letter if letter == "\u00b5" else unicodedata.normalize("NFKC", letter) for letter in text
    )
    for old, new in _SAME.items():
        folded = folded.replace(old, new)
    folded = re.sub(
        r"(?<![A-Za-z])(?:[A-Za-z]\.){2,}", lambda dotted: dotted.group().replace(".", ""), folded
    )  # V.W. -> VW
    return re.sub(r"\s+", " ", folded).strip()


def number(text: str) -> float:
    """Return the value of what NUMBER matches."""
    return float(text.replace(",", "."))


def plain(value: float) -> str:
    """Return a value as people write it: no exponent, no trailing zeros."""
    return f"{value:.12f}".rstrip("0").rstrip(".") or "0"
