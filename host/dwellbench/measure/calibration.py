"""What turns codes into volts and amperes: the box's calibration, or the drawing's numbers with their worst
tolerance.

Data that the box keeps and the host uses; firmware never reads it, so no calibration can loosen a safety
threshold.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, replace
from math import sqrt
from typing import Any

from dwellbench.errors import UsageError
from dwellbench.measure.reference import FIXTURE_OHM, FIXTURE_U_REL, reference_box
from dwellbench.measure.zero import Zero

SCHEMA = 1
NOMINAL = "nominal"

_PLAIN = ("per_code", "offset_code", "u_rel", "u_offset_code")

# The converter's own limits, each range (SBAS444, SBAS563: gain 0.15 %, offset 3 codes at most).
_CONVERTER_GAIN = 0.0015
_CONVERTER_OFFSET_CODE = 3.0


@dataclass(frozen=True)
class Scale:
    """One channel on one full scale: value = (code - offset_code) * per_code, `u_rel` of the scale.

    A fitted one says more: the correlation `r` of its line's two parameters, the part of `u_rel` that its points had in common,
    and how many they were.
    """

    per_code: float
    offset_code: float
    u_rel: float
    u_offset_code: float
    r: float = 0.0
    common_rel: float = 0.0
    points: int = 0

    def as_json(self) -> dict[str, float]:
        """The members, those of a fitted scale only where it is one."""
        own = asdict(self)
        return own if self.points else {name: own[name] for name in _PLAIN}


@dataclass(frozen=True)
class Calibration:
    """Scales of one box. `volts` and `supply` by range (0 wide, 1 fine), `amps` by (shunt 0..2, range).

    `zeros`: the empty fixture as it was measured, one for each voltage; `fixture_ohm` stands where there is none.
    """

    id: str
    volts: tuple[Scale, Scale]
    supply: tuple[Scale, Scale]
    amps: Mapping[tuple[int, int], Scale]
    fixture_ohm: float
    u_fixture_rel: float
    box: str | None = None
    made_utc: str | None = None
    valid_days: float | None = None
    temperature_C: float | None = None
    zeros: tuple[Zero, ...] = ()

    @property
    def nominal(self) -> bool:
        """Whether no calibration was there and the drawing's numbers stand in."""
        return self.id == NOMINAL

    @classmethod
    def without(cls) -> Calibration:
        """The reference box as drawn, with its tolerances: what holds when a box has no calibration."""
        box = reference_box()
        u_rel = sqrt(box.u_path**2 + _CONVERTER_GAIN**2 / 3.0)
        u_code = _CONVERTER_OFFSET_CODE / sqrt(3.0)
        fine, wide = (Scale(box.per_code_V(f) * box.divider_ratio, 0.0, u_rel, u_code) for f in (1, 0))
        amps = {
            (shunt, f): Scale(box.per_code_V(f) / ohm, 0.0, u_rel, u_code)
            for shunt, ohm in enumerate(box.shunts_ohm)
            for f in (0, 1)
        }
        return cls(NOMINAL, (wide, fine), (wide, fine), amps, FIXTURE_OHM, FIXTURE_U_REL)

    @classmethod
    def from_json(cls, data: Mapping[str, Any] | None) -> Calibration:
        """Read the box's calibration; None gives the nominal one. Raises UsageError for what is not one."""
        if data is None:
            return cls.without()
        try:
            return cls._read(data)
        except (KeyError, TypeError, ValueError, AttributeError) as wrong:
            raise UsageError(
                f"The box's calibration cannot be used: {wrong}.",
                remedy="Calibrate the box again, or restore its last calibration.",
            ) from None

    def as_json(self) -> dict[str, Any]:
        """The document that the box keeps; `from_json` reads it back."""
        box = reference_box()
        millivolts = [round(volts * 1e3) for volts in box.ranges_V]

        def pair(scales: tuple[Scale, Scale]) -> list[dict[str, float]]:
            return [{"range_mv": mv, **scale.as_json()} for mv, scale in zip(millivolts, scales, strict=True)]

        return {
            "schema": SCHEMA,
            "id": self.id,
            "box": self.box,
            "made_utc": self.made_utc,
            "valid_days": self.valid_days,
            "temperature_C": self.temperature_C,
            "volts": pair(self.volts),
            "supply": pair(self.supply),
            "amps": [
                {"shunt_ohm": round(box.shunts_ohm[shunt]), "range_mv": millivolts[fine], **scale.as_json()}
                for (shunt, fine), scale in sorted(self.amps.items())
            ],
            "fixture_ohm": self.fixture_ohm,
            "u_fixture_rel": self.u_fixture_rel,
            "zeros": [zero.as_json() for zero in self.zeros],
        }

    @classmethod
    def _read(cls, data: Mapping[str, Any]) -> Calibration:
        if data["schema"] != SCHEMA:
            raise ValueError(f"schema {data['schema']!r} is not known")
        zeros = tuple(Zero.from_json(zero) for zero in data.get("zeros", []))
        if "volts" not in data and data["id"] == NOMINAL:
            return replace(cls.without(), box=data.get("box"), zeros=zeros)
        box = reference_box()
        ranges = {round(volts * 1e3): fine for fine, volts in enumerate(box.ranges_V)}
        shunts = {round(ohm): index for index, ohm in enumerate(box.shunts_ohm)}
        amps = {
            (shunts[round(row["shunt_ohm"])], ranges[round(row["range_mv"])]): _scale(row)
            for row in data["amps"]
        }
        if len(amps) != len(shunts) * len(ranges):
            raise ValueError("a shunt and range is missing")
        fixture_ohm = float(data["fixture_ohm"])
        if not fixture_ohm > 0.0:
            raise ValueError("the fixture's insulation is not positive")
        return cls(
            id=str(data["id"]),
            volts=_pair(data["volts"], ranges),
            supply=_pair(data["supply"], ranges),
            amps=amps,
            fixture_ohm=fixture_ohm,
            u_fixture_rel=float(data["u_fixture_rel"]),
            box=data.get("box"),
            made_utc=data.get("made_utc"),
            valid_days=data.get("valid_days"),
            temperature_C=data.get("temperature_C"),
            zeros=zeros,
        )


def _pair(rows: list[Mapping[str, Any]], ranges: Mapping[int, int]) -> tuple[Scale, Scale]:
    scales = {ranges[round(row["range_mv"])]: _scale(row) for row in rows}
    return scales[0], scales[1]


def _scale(row: Mapping[str, Any]) -> Scale:
    scale = Scale(
        per_code=float(row["per_code"]),
        offset_code=float(row.get("offset_code", 0.0)),
        u_rel=float(row["u_rel"]),
        u_offset_code=float(row.get("u_offset_code", 0.0)),
        r=float(row.get("r", 0.0)),
        common_rel=float(row.get("common_rel", 0.0)),
        points=int(row.get("points", 0)),
    )
    if not (scale.per_code > 0.0 and scale.u_rel >= 0.0 and scale.u_offset_code >= 0.0):
        raise ValueError("a scale is not positive")
    return scale
