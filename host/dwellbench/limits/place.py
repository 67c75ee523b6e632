"""One place: a kind with the numbers that hold in this set. Reads the role as people write it:
`coupling@310V/470k`.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from dwellbench.errors import UsageError
from dwellbench.limits.places import BY_ID, KINDS, NEVER, PULSE, PlaceKind

ANY = "any"

_ROLE = re.compile(r"^(?P<id>[a-z_]+)(?:@(?P<volts>[^/]+))?(?:/(?P<ohms>.+))?$")
_NUMBER = re.compile(r"^(?P<whole>\d+(?:\.\d+)?)(?P<scale>[kKmMgGtTrR]?)(?P<part>\d*)(?:ohms?|Ω)?$")
_VOLTS = re.compile(r"^(?P<volts>\d+(?:\.\d+)?)\s*[vV]?(?:dc|DC)?$")
_SCALES = {"": 1.0, "R": 1.0, "K": 1e3, "M": 1e6, "G": 1e9, "T": 1e12}


def ohms(text: str) -> float:
    """Read a resistance: `470k`, `4k7`, `2.2M`, `470000`. Raises ValueError."""
    match = _NUMBER.match(text.strip())
    if match is None or (match["part"] and ("." in match["whole"] or not match["scale"])):
        raise ValueError(f"{text!r} is not a resistance")
    number = match["whole"] + ("." + match["part"] if match["part"] else "")
    value = float(number) * _SCALES[match["scale"].upper()]
    if not 0.0 < value < 1e13:
        raise ValueError(f"{text!r} is not a usable resistance")
    return value


def volts(text: str) -> float:
    """Read a DC voltage: `310V`, `310`. Raises ValueError."""
    match = _VOLTS.match(text.strip())
    if match is None or not 0.0 < float(match["volts"]) < 1e5:
        raise ValueError(f"{text!r} is not a voltage")
    return float(match["volts"])


@dataclass(frozen=True)
class Place:
    """A place with its numbers. `given_V` is the voltage the role named, None when the kind's usual one
    stands.
    """

    kind: PlaceKind
    given_V: float | None = None
    given_ohm: float | None = None

    @property
    def volts_V(self) -> float | None:
        """The place's highest voltage: as given, else the kind's usual one."""
        return self.kind.volts_V if self.given_V is None else self.given_V

    @property
    def series_ohm(self) -> float | None:
        """Grid leak or feeding resistance: as given, else the kind's usual one."""
        return self.kind.series_ohm if self.given_ohm is None else self.given_ohm

    @property
    def never_fit(self) -> bool:
        """Whether no bench test can make a part fit for this place."""
        return self.kind.rule == NEVER

    @property
    def beyond_box(self) -> bool:
        """Whether what stresses a part there lies beyond this box."""
        return self.kind.rule == PULSE

    @property
    def role(self) -> str:
        """The role as one word, with the numbers that were given."""
        text = self.kind.id
        if self.given_V is not None:
            text += f"@{self.given_V:g}V"
        if self.given_ohm is not None:
            text += f"/{short_ohms(self.given_ohm)}"
        return text

    @classmethod
    def parse(cls, text: str) -> Place | None:
        """Read a role. `any` (or nothing) is no particular place: None. Raises UsageError with the known
        places.
        """
        wanted = text.strip().lower() if "@" not in text and "/" not in text else text.strip()
        if wanted in ("", ANY):
            return None
        match = _ROLE.match(wanted)
        kind = BY_ID.get(match["id"]) if match else None
        if match is None or kind is None:
            known = ", ".join(kind.id for kind in KINDS)
            raise UsageError(
                f"{text!r} is not a place this program knows.", remedy=f"Use {ANY} or one of: {known}."
            )
        try:
            given_V = volts(match["volts"]) if match["volts"] else None
            given_ohm = ohms(match["ohms"]) if match["ohms"] else None
        except ValueError as wrong:
            remedy = f"Write it like {kind.id}@310V/470k."
            raise UsageError(f"In the role {text!r}, {wrong}.", remedy=remedy) from None
        return cls(kind, given_V, given_ohm)


def short_ohms(ohm: float) -> str:
    """A resistance the short way: 470k, 2.2M."""
    for scale, letter in ((1e12, "T"), (1e9, "G"), (1e6, "M"), (1e3, "k")):
        if ohm >= scale:
            return f"{ohm / scale:.12g}{letter}"
    return f"{ohm:.12g}"
