"""Words for what is inside a part, what they imply, and what they warn of.

MKT, MKP, MKC, KT, KP, KS: letters of DIN 41379 for film parts (from memory). C0G, X7R and the like: temperature codes of EIA-198.
The other words are the trade's (common practice, no source).
"""

from __future__ import annotations

import re
from dataclasses import dataclass


@dataclass(frozen=True)
class Kind:
    """What a word implies."""

    dielectric: str | None
    polar: bool | None = None
    remark: str | None = None


_OIL = "Oil-filled parts of unknown age may hold PCB: do not open; bag it if it leaks."
_SAFETY = "A mains safety class is marked: a leakage test never proves such a part fit for a mains position."

WORDS = {
    "electrolytic|elyt|elko|elec|electro|lytic|aluminium|aluminum": Kind("electrolytic", polar=True),
    "bipolar|non[ -]?polar(?:ised|ized)?|bp|unpolar(?:ised|ized)?": Kind(None, polar=False),
    "tantalum|tant|ta": Kind("tantalum", polar=True),
    "polypropylene|polyprop|mkp|kp|pp": Kind("polypropylene"),
    "polyester|mylar|pet|mkt|kt": Kind("polyester"),
    "polystyrene|styro(?:flex)?|styrol|styrene|ks": Kind("polystyrene"),
    "polycarbonate|mkc|kc": Kind("polycarbonate"),
    "film|foil|plastic": Kind("film"),
    "oil[ -]?paper|paper[ -]?(?:in[ -]?)?oil|pio|oil|oil[ -]?filled": Kind("paper", remark=_OIL),
    "paper|wax|waxed|papier|pap": Kind("paper"),
    "silver(?:ed)?[ -]?mica|mica|glimmer|sm": Kind("mica"),
    "c0g|cog|np0|npo|n\\d{2,4}|p100": Kind("ceramic_1"),
    "x7r|x5r|x7s|x7t|z5u|z5v|z5p|y5v|y5p|y5u|x5f|x5p|k2000|k4000|hi-?k": Kind("ceramic_2"),
    "ceramic|cer|disc|disk|keramik": Kind("ceramic"),
    "glass": Kind("glass"),
    "vacuum": Kind("vacuum"),
    "x1|x2|x3|y1|y2|y3|y4": Kind(None, remark=_SAFETY),
}

WORD = re.compile("(?P<kind>" + "|".join(WORDS) + r")(?![A-Za-z0-9])\.?", re.IGNORECASE)
_EACH = tuple((re.compile(words, re.IGNORECASE), kind) for words, kind in WORDS.items())


def kind_of(word: str) -> Kind:
    """Return what a word that WORD matched implies."""
    for pattern, kind in _EACH:
        if pattern.fullmatch(word):
            return kind
    raise KeyError(word)
