"""How much more leaks when it is warmer, by dielectric: published figures where there are some.

A part on the bench is at room temperature, in a chassis it is not. A place's demand is therefore made of the
leakage at the place's temperature.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import exp, log


@dataclass(frozen=True)
class Warming:
    """Leakage grows by `factor` over `over_K`."""

    factor: float
    over_K: float
    source: str


_DOUBLES = "doubles every 10 K; electrolytic application notes and IEEE 43, from memory"
_WIMA = "one decade from 25 to 85 C, table of dielectrics on wima.de"

WARMING = {
    "paper": Warming(2.0, 10.0, "wax paper halves its insulation every 8 to 10 K, from memory"),
    "electrolytic": Warming(2.0, 10.0, _DOUBLES),
    "tantalum": Warming(10.0, 60.0, "ten times at 85 C, component table on tancap.com.cn"),
    "ceramic_2": Warming(2.0, 60.0, "half the insulation at 85 C (X7R), table of dielectrics on wima.de"),
    "ceramic": Warming(2.0, 10.0, "as an unknown dielectric"),
    "ceramic_1": Warming(10.0, 60.0, _WIMA),
    "polyester": Warming(10.0, 60.0, _WIMA),
    "polypropylene": Warming(10.0, 60.0, _WIMA),
    "polycarbonate": Warming(10.0, 60.0, "as polyester"),
    "polystyrene": Warming(10.0, 60.0, "as polypropylene"),
    "film": Warming(10.0, 60.0, _WIMA),
    "mica": Warming(10.0, 100.0, "100 Gohm at 25 C, 10 Gohm at 125 C, CDE dipped mica guide"),
    "glass": Warming(10.0, 100.0, "as mica"),
    "vacuum": Warming(1.0, 10.0, "no dielectric to warm"),
}
_UNKNOWN = Warming(2.0, 10.0, "as the worst known dielectric")
ROOM_C = 23.0


def warming(dielectric: str | None) -> Warming:
    """The row of a dielectric, the worst for an unknown one."""
    return WARMING.get(dielectric or "", _UNKNOWN)


def warmed(dielectric: str | None, from_C: float | None, to_C: float) -> float:
    """Factor by which leakage grows from `from_C` (room when unknown) to `to_C`; never below 1."""
    row = warming(dielectric)
    rise_K = to_C - (ROOM_C if from_C is None else from_C)
    return max(exp(log(row.factor) * rise_K / row.over_K), 1.0)
