"""The columns of a trace file: which must be there, which may, and what each becomes.

One table serves reader and writer, so that an export reads back to the same trace.
"""

from __future__ import annotations

REQUIRED = ("t_s", "stage", "shunt_ohm", "v_part_V", "i_shunt_A", "v_supply_V")

SPREADS = ("v_min_V", "v_max_V", "i_min_A", "i_max_A")
"""Least and greatest single reading; an empty cell is not known."""

MARKS = ("unsettled", "ramp", "gap", "v_clipped")
"""0 or 1."""

OPTIONAL = ("clipped", *SPREADS, "range_V", "interval_s", "u_offset_A", *MARKS)

WRITTEN = (*REQUIRED, *OPTIONAL)

HEADER_NUMBERS = (
    "charge_ohm",
    "divider_ohm",
    "bleed_ohm",
    "fixture_ohm",
    "fixture_F",
    "temperature_C",
    "humidity_percent",
    "u_gain_v",
    "u_gain_i",
    "u_offset_A",
    "u_fixture_rel",
    "asked_V",
    "dwell_asked_s",
    "look_pf",
    "short_mv",
    "short_na",
    "residual_mv",
    "zero_V",
    "zero_age_s",
)
"""Header keys that must be numbers when they are there."""

POSITIVE = ("charge_ohm", "divider_ohm", "bleed_ohm", "fixture_ohm")
NOT_NEGATIVE = ("u_gain_v", "u_gain_i", "u_offset_A", "u_fixture_rel", "fixture_F")
