"""What says volts on a part: rated (working), test or surge, alternating; and the two-character codes.

The codes are a table, not a formula, because several letters break the rule (JIS/EIA two-character code; members as published
decoder tables agree on them).
"""

from __future__ import annotations

import re

from dwellbench.marking.words import NUMBER

RATED, TEST, AC = "rated", "test", "ac"

CODES = {
    "0G": 4.0,
    "0L": 5.5,
    "0J": 6.3,
    "1A": 10.0,
    "1C": 16.0,
    "1D": 20.0,
    "1E": 25.0,
    "1V": 35.0,
    "1G": 40.0,
    "1H": 50.0,
    "1J": 63.0,
    "1K": 80.0,
    "2A": 100.0,
    "2Q": 110.0,
    "2B": 125.0,
    "2T": 150.0,
    "2C": 160.0,
    "2Z": 180.0,
    "2D": 200.0,
    "2P": 220.0,
    "2E": 250.0,
    "2F": 315.0,
    "2V": 350.0,
    "2G": 400.0,
    "2W": 450.0,
    "2H": 500.0,
    "2J": 630.0,
    "2K": 800.0,
    "3A": 1000.0,
    "3B": 1250.0,
}

# Words that say what kind of voltage a number is; they stand before or behind it.
_RATED = "wvdc|vdcw|dcwv|wkvdc|vdc|vwkg|wdc|wkg|working|work|wv|vw|rated|dc|arb|betrieb"
_TEST = "test|tst|tested|proof|peak|surge|spitze|tv|pr\u00fcf|pk"
_AC = "vac|ac"
_KINDS = {
    **dict.fromkeys(_RATED.split("|"), RATED),
    **dict.fromkeys(_TEST.split("|"), TEST),
    **dict.fromkeys(_AC.split("|"), AC),
}

WORD = re.compile(rf"(?P<word>{_RATED}|{_TEST}|{_AC})\b\.?:?", re.IGNORECASE)

_UNIT = r"(?:k ?v|v(?:olts?)?)"
_KIND = rf"(?:{_RATED}|{_TEST}|{_AC})"
VOLTS = re.compile(
    rf"(?P<first>{NUMBER})(?: ?/ ?(?P<second>{NUMBER}))? ?(?:(?P<unit>{_UNIT})\.?(?P<sign> ?[~=-](?![\d.]))?"
    rf"(?: ?(?P<kind>{_KIND})\b\.?)?|(?P<bare>{_KIND})\b\.?)(?![A-Za-z0-9])",
    re.IGNORECASE,
)
"""Volts with a unit or a word of their kind behind: 450V, 250/750 V, 275VAC, 400V~, 600 WVDC, 475 wkg, 1kV."""


def kind_of(word: str) -> str:
    """Return RATED, TEST or AC of a word."""
    return _KINDS[word.lower().rstrip(".:")]
