"""A part: what is written on a capacitor, read as the trade writes it, with what was understood and what is in doubt."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from typing import Any

from dwellbench.errors import MarkingError
from dwellbench.marking.reading import Reading, read
from dwellbench.marking.words import uniform

LONGEST = 120
"""Letters in a marking; more is not one."""

# Where one section with volts of its own ends and the next begins: 40uF 450V + 20uF 25V.
_BETWEEN = re.compile(r"(?<=[Vv]) ?\+ ?(?=[.,\d])")


@dataclass(frozen=True)
class Part:
    """A capacitor as marked. SI units; None where nothing is marked.

    `tolerance` are fractions, low then high. `rated_V` is the working voltage of kind `rated_kind` ("dc" or "ac"); `test_V` is a
    test, peak or surge voltage that was marked beside it. A can of several sections has them in `sections` and no capacitance
    of its own.
    """

    marking: str
    capacitance_F: float | None = None
    tolerance: tuple[float, float] | None = None
    rated_V: float | None = None
    rated_kind: str | None = None
    dielectric: str | None = None
    polar: bool = False
    sections: tuple[Part, ...] = ()
    test_V: float | None = None
    understood: tuple[str, ...] = ()
    doubts: tuple[str, ...] = ()

    @classmethod
    def parse(cls, text: str) -> Part:
        """Read a marking. Raises MarkingError with the readings to choose from when there is more than one, or none."""
        if len(text) > LONGEST:
            raise MarkingError(
                f"A marking of {len(text)} letters is too long.",
                remedy=f"Type at most {LONGEST} letters.",
                readings=[],
            )
        clean = uniform(text)
        pieces = _BETWEEN.split(clean)
        try:
            parts = [_from_reading(text if len(pieces) == 1 else piece, read(piece)) for piece in pieces]
        except MarkingError as error:
            error.details["readings"] = [reading for reading in error.readings if _reads(reading)]
            raise
        return parts[0] if len(parts) == 1 else _can(text, parts)

    def as_json(self) -> dict[str, Any]:
        """Return the interface's object."""
        return {
            "marking": self.marking,
            "capacitance_F": self.capacitance_F,
            "tolerance": None if self.tolerance is None else list(self.tolerance),
            "rated_V": self.rated_V,
            "rated_kind": self.rated_kind,
            "dielectric": self.dielectric,
            "sections": [section.as_json() for section in self.sections],
        }


def _reads(marking: str) -> bool:
    """Say whether a reading that is offered can itself be read."""
    try:
        read(uniform(marking))
    except MarkingError:
        return False
    return True


def _from_reading(text: str, reading: Reading) -> Part:
    ac_only = reading.rated_V is None and reading.ac_V is not None
    whole = Part(
        marking=text,
        capacitance_F=reading.farads,
        tolerance=reading.tolerance,
        rated_V=reading.ac_V if ac_only else reading.rated_V,
        rated_kind="ac" if ac_only else None if reading.rated_V is None else "dc",
        dielectric=reading.dielectric,
        polar=bool(reading.polar),
        test_V=reading.test_V,
        understood=tuple(reading.understood),
        doubts=tuple(reading.doubts),
    )
    if not reading.sections:
        return whole
    named = [*reading.symbols, *[""] * len(reading.sections)]
    sections = tuple(
        replace(whole, marking=f"{symbol} {text}".strip(), capacitance_F=farads, understood=(), doubts=())
        for farads, symbol in zip(reading.sections, named, strict=False)
    )
    return replace(whole, sections=sections)


def _can(text: str, sections: list[Part]) -> Part:
    """Sections with volts of their own; what one says of the kind holds for all."""
    dielectric = next((section.dielectric for section in sections if section.dielectric), None)
    polar = any(section.polar for section in sections)
    told = tuple(sentence for section in sections for sentence in section.understood)
    doubts = tuple(dict.fromkeys(sentence for section in sections for sentence in section.doubts))
    if dielectric:
        doubts = tuple(sentence for sentence in doubts if not sentence.startswith("No dielectric"))
    shared = tuple(
        replace(section, dielectric=dielectric, polar=polar, understood=(), doubts=()) for section in sections
    )
    return Part(
        marking=text,
        rated_V=max((section.rated_V or 0.0 for section in sections), default=0.0) or None,
        rated_kind=sections[0].rated_kind,
        dielectric=dielectric,
        polar=polar,
        sections=shared,
        understood=told,
        doubts=doubts,
    )
