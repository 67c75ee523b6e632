"""The reference box's numbers in SI units, as far as measuring needs them: what a trace leaves out is taken
from here.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import cache
from math import sqrt

from dwellbench import assets

# What the drawing of the box does not state. An open fixture measures about this; typical of the
# construction, no source, and therefore with a wide doubt. `zero` measures the box's own.
FIXTURE_OHM = 1.0e12
FIXTURE_U_REL = 0.5
FIXTURE_F = 2.0e-12
FIXTURE_U_F = 1.0e-12


@dataclass(frozen=True)
class ReferenceBox:
    """Ohms, volts, seconds of the reference box. `ranges_V` wide, fine; `shunts_ohm` low to high."""

    charge_ohm: float
    divider_ohm: float
    divider_ratio: float
    bleed_ohm: float
    shunts_ohm: tuple[float, float, float]
    ranges_V: tuple[float, float]
    u_path: float
    window_s: float
    period_s: float
    thermistor_feed_V: float
    thermistor_pull_ohm: float
    thermistor_r25_ohm: float
    thermistor_b_K: float

    def per_code_V(self, fine: int) -> float:
        """Converter volts a code on full scale 0 (wide) or 1 (fine)."""
        return self.ranges_V[fine] / 32768.0


@cache
def reference_box() -> ReferenceBox:
    """Read device/reference_box.json. A tolerance is taken as the half width of a rectangle (JCGM 100,
    4.3.7).
    """
    raw = json.loads((assets.device() / "reference_box.json").read_text("utf-8"))
    paths, converter = raw["paths"], raw["converter"]
    divider_ohm = float(paths["divider_top_ohm"] + paths["divider_bottom_ohm"])
    low, mid, high = (float(ohm) for ohm in paths["shunts_ohm"])
    wide, fine = (mv / 1e3 for mv in converter["ranges_mv"])
    return ReferenceBox(
        charge_ohm=float(paths["charge_ohm"]),
        divider_ohm=divider_ohm,
        divider_ratio=divider_ohm / paths["divider_bottom_ohm"],
        bleed_ohm=float(paths["bleed_ohm"][0]),
        shunts_ohm=(low, mid, high),
        ranges_V=(wide, fine),
        u_path=paths["tolerance_ppm"] * 1e-6 / sqrt(3.0),
        window_s=raw["times"]["window_ms"] / 1e3,
        period_s=raw["times"]["period_ms"] / 1e3,
        thermistor_feed_V=converter["thermistor_feed_mv"] / 1e3,
        thermistor_pull_ohm=float(converter["thermistor_pull_ohm"]),
        thermistor_r25_ohm=float(converter["thermistor_r25_ohm"]),
        thermistor_b_K=float(converter["thermistor_b_k"]),
    )


@cache
def code_names(table: str) -> dict[int, str]:
    """Names by code of `stages`, `ends` or `faults` in protocol/codes.json."""
    codes = json.loads((assets.protocol() / "codes.json").read_text("utf-8"))
    return {row["code"]: row["id"] for row in codes[table]}


@cache
def flag_mask(name: str) -> int:
    """The mask of one flag of a sample row."""
    codes = json.loads((assets.protocol() / "codes.json").read_text("utf-8"))
    return next(1 << int(row["bit"]) for row in codes["flags"] if row["id"] == name)
