"""The reference box's numbers in SI units, read from the one file that states them, and the few that only
physics needs."""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from dwellbench import assets

# What the drawing of the box does not state but the physics cannot do without. Typical of the construction,
# no source.
STRAY_F = 10e-12  # wiring of the high node to the guard
FIXTURE_F = 2e-12  # empty clips, high to low
LOW_F = 100e-12  # cable, clamp and buffer at the low node
CLAMP_OHM = 10.0  # rails and diode behind the clamp
LEAST_ESR_OHM = 1e-3  # of any lead; keeps the algebra of the high node finite


@dataclass(frozen=True)
class Box:
    """Ohms, farads, volts, seconds of the reference box."""

    charge_ohm: float
    bleed_ohm: tuple[float, float]
    divider_top_ohm: float
    divider_bottom_ohm: float
    shunts_ohm: tuple[float, float, float]
    clamp_V: float
    supply_F: float
    off_bleeder_ohm: float
    supply_max_V: float
    slew_V_per_s: float
    drift_V_per_s: float
    ripple_V: float
    supply_tolerance: float
    pump_hold_s: float
    ranges_V: tuple[float, float]
    samples_per_s: float
    rate_tolerance: float
    reference_V: float
    thermistor_pull_ohm: float
    thermistor_feed_V: float
    thermistor_r25_ohm: float
    thermistor_b_K: float
    safe_V: float
    relay_s: float
    watchdog_s: float

    @property
    def divider_ohm(self) -> float:
        """Total of one divider, ohms."""
        return self.divider_top_ohm + self.divider_bottom_ohm

    @property
    def divider_ratio(self) -> float:
        """Node volts for one volt at the converter."""
        return self.divider_ohm / self.divider_bottom_ohm


def _read(raw: dict[str, Any]) -> Box:
    supply, paths, converter = raw["supply"], raw["paths"], raw["converter"]
    return Box(
        charge_ohm=float(paths["charge_ohm"]),
        bleed_ohm=(float(paths["bleed_ohm"][0]), float(paths["bleed_ohm"][1])),
        divider_top_ohm=float(paths["divider_top_ohm"]),
        divider_bottom_ohm=float(paths["divider_bottom_ohm"]),
        shunts_ohm=tuple(float(ohm) for ohm in paths["shunts_ohm"]),  # type: ignore[arg-type]
        clamp_V=paths["clamp_mv"] / 1e3,
        supply_F=supply["output_nf"] * 1e-9,
        off_bleeder_ohm=float(supply["off_bleeder_ohm"]),
        supply_max_V=raw["ratings"]["volts_mv"] / 1e3,
        slew_V_per_s=float(supply["slew_mv_per_ms"]),
        drift_V_per_s=supply["drift_uv_per_s"] * 1e-6,
        ripple_V=supply["ripple_mv"] / 1e3,
        supply_tolerance=supply["tolerance_ppm"] * 1e-6,
        pump_hold_s=supply["pump_hold_ms"] / 1e3,
        ranges_V=(converter["ranges_mv"][0] / 1e3, converter["ranges_mv"][1] / 1e3),
        samples_per_s=float(converter["samples_per_s"]),
        rate_tolerance=converter["rate_tolerance_ppm"] * 1e-6,
        reference_V=converter["reference_mv"] / 1e3,
        thermistor_pull_ohm=float(converter["thermistor_pull_ohm"]),
        thermistor_feed_V=converter["thermistor_feed_mv"] / 1e3,
        thermistor_r25_ohm=float(converter["thermistor_r25_ohm"]),
        thermistor_b_K=float(converter["thermistor_b_k"]),
        safe_V=raw["safe"]["safe_mv"] / 1e3,
        relay_s=raw["times"]["relay_ms"] / 1e3,
        watchdog_s=raw["times"]["watchdog_ms"] / 1e3,
    )


@lru_cache(maxsize=1)
def box() -> Box:
    """The reference box."""
    return _read(json.loads((assets.device() / "reference_box.json").read_text("utf-8")))


@lru_cache(maxsize=8)
def bits(table: str) -> dict[str, int]:
    """Masks by name of `inputs` or `outputs` in codes.json."""
    codes = json.loads((assets.protocol() / "codes.json").read_text("utf-8"))
    return {row["id"]: 1 << row["bit"] for row in codes[table]}


@lru_cache(maxsize=1)
def channels() -> dict[str, int]:
    """Converter channels by name."""
    codes = json.loads((assets.protocol() / "codes.json").read_text("utf-8"))
    return {row["id"]: row["code"] for row in codes["channels"]}


@lru_cache(maxsize=1)
def stages() -> dict[str, int]:
    """Codes of the stages by name."""
    codes = json.loads((assets.protocol() / "codes.json").read_text("utf-8"))
    return {row["id"]: row["code"] for row in codes["stages"]}


def flags() -> dict[str, int]:
    """Masks of a sample's flags by name."""
    return bits("flags")
