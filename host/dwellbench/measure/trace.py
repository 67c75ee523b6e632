"""A trace: what one run looked like in volts and amperes, row by row, and what is known of the box that made
it.

A row is the mean over the interval that ends at its time. `v_part_V` is the high node to ground; the part
itself sees `across_V`, which is less by the shunt's drop.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dwellbench.measure.reference import FIXTURE_F, FIXTURE_OHM, FIXTURE_U_REL, reference_box

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Words = NDArray[np.str_]

ESTIMATED = ("charge", "dwell", "discharge", "recovery")
"""Stages that the estimators read; rows of others are kept."""

NUMBERS = ("charge_ohm", "divider_ohm", "bleed_ohm", "fixture_ohm", "temperature_C", "u_gain_v", "u_gain_i")
"""Header keys whose absence the outcome mentions."""


@dataclass(frozen=True)
class Trace:
    """Arrays of one length, seconds, volts, amperes, ohms; `header` holds what was stated about box and run.

    `clipped` is the share of shunt readings in the row that clipped, `unsettled` marks rows blanked after a
    change of shunt or range, `gap` rows before which others are missing, `u_offset_A` the standard
    uncertainty of the current's zero, `range_V` the shunt converter's full scale; `v_min_V` to `i_max_A` the
    least and greatest single readings (NaN where they are not known).
    """

    t_s: Floats
    interval_s: Floats
    stage: Words
    shunt_ohm: Floats
    v_part_V: Floats
    i_shunt_A: Floats
    v_supply_V: Floats
    clipped: Floats
    unsettled: Bools
    ramp: Bools
    gap: Bools
    v_clipped: Bools
    range_V: Floats
    u_offset_A: Floats
    v_min_V: Floats
    v_max_V: Floats
    i_min_A: Floats
    i_max_A: Floats
    header: Mapping[str, Any] = field(default_factory=dict)

    def __len__(self) -> int:
        """Rows."""
        return int(self.t_s.size)

    @property
    def across_V(self) -> Floats:
        """Volts across the part itself, shape of `t_s`."""
        return np.asarray(self.v_part_V - self.i_shunt_A * self.shunt_ohm)

    @property
    def readable(self) -> Bools:
        """Rows whose current is a reading: nothing clipped, not even near full scale."""
        full = np.abs(self.i_shunt_A) * self.shunt_ohm >= 0.999 * self.range_V
        return np.asarray((self.clipped <= 0.0) & ~full & ~self.v_clipped)

    def rows(self, *stages: str) -> Bools:
        """Mask of the rows of these stages."""
        return np.asarray(np.isin(self.stage, stages))

    def number(self, key: str) -> float | None:
        """A number of the header, None when it is not there."""
        value = self.header.get(key)
        return float(value) if isinstance(value, (int, float)) and not isinstance(value, bool) else None

    def text(self, key: str) -> str | None:
        """A word of the header, None when it is not there."""
        value = self.header.get(key)
        return None if value is None else str(value)

    @property
    def assumed(self) -> tuple[str, ...]:
        """The header keys that were left out, so that the reference box's numbers stand in for them."""
        return tuple(key for key in NUMBERS if self.number(key) is None)


@dataclass(frozen=True)
class Circuit:
    """The box around the part: ohms, farads, and standard uncertainties (`u_gain_*` relative)."""

    charge_ohm: float
    divider_ohm: float
    bleed_ohm: float
    fixture_ohm: float
    u_fixture_rel: float
    fixture_F: float
    u_gain_v: float
    u_gain_i: float

    @property
    def thevenin_ohm(self) -> float:
        """What the part is charged through: charge path beside the divider."""
        return 1.0 / (1.0 / self.charge_ohm + 1.0 / self.divider_ohm)


def circuit_of(trace: Trace) -> Circuit:
    """The box as the header states it, the reference box for the rest."""
    box = reference_box()

    def stated(key: str, otherwise: float) -> float:
        value = trace.number(key)
        return otherwise if value is None else value

    return Circuit(
        charge_ohm=stated("charge_ohm", box.charge_ohm),
        divider_ohm=stated("divider_ohm", box.divider_ohm),
        bleed_ohm=stated("bleed_ohm", box.bleed_ohm),
        fixture_ohm=stated("fixture_ohm", FIXTURE_OHM),
        u_fixture_rel=stated("u_fixture_rel", FIXTURE_U_REL),
        fixture_F=stated("fixture_F", FIXTURE_F),
        u_gain_v=stated("u_gain_v", box.u_path),
        u_gain_i=stated("u_gain_i", box.u_path),
    )
