"""Codes to volts and amperes: RawTrace and Calibration give a Trace.

The shunt's zero comes from the run's own auto-zero rows (stage `zero`, supply off, bleed on), one for each
shunt and range; where none is there the zero is taken as nought with the converter's whole offset as doubt.
What is left after zeroing is the resolution of that one look: noise of its mean and a rectangle of one code.
"""

from __future__ import annotations

from math import sqrt
from typing import Any

import numpy as np

from dwellbench.measure.calibration import Calibration, Scale
from dwellbench.measure.raw import RawTrace
from dwellbench.measure.reference import code_names, flag_mask, reference_box
from dwellbench.measure.trace import Bools, Floats, Trace
from dwellbench.measure.validity import age_s, in_force, lapsed
from dwellbench.measure.zero import nearest

_CODE_U = 1.0 / sqrt(12.0)  # rectangle of one code
_LEAST_NOISE_CODE = 0.5
_GAP_WINDOWS = 1.5  # time between two rows above which a row was lost in between


def calibrate(raw: RawTrace, calibration: Calibration | None = None) -> Trace:
    """Return the trace in SI units; without a calibration by the drawing's numbers and their tolerances.

    Rows without any reading of part or shunt are left out.
    """
    calibration, doubt = in_force(
        calibration or Calibration.without(), _said(raw, "box"), _said(raw, "time_utc")
    )
    kept = RawTrace(raw.rows[(raw.column("nv") > 0) & (raw.column("ni") > 0)], raw.info)
    box = reference_box()
    shunt, fine = kept.column("shunt"), kept.column("range")
    flags = kept.column("flags")
    interval_s, gap = _intervals(kept)
    current = _Currents(kept, calibration)
    volts = _Volts(kept, calibration)
    return Trace(
        t_s=kept.column("t") / 1e3,
        interval_s=interval_s,
        stage=np.array(
            [code_names("stages").get(int(code), f"stage_{code}") for code in kept.column("stage")], dtype=str
        ),
        shunt_ohm=np.asarray(box.shunts_ohm)[shunt],
        v_part_V=volts.of(kept.column("sv") / kept.column("nv")),
        i_shunt_A=current.of(kept.column("si") / kept.column("ni")),
        v_supply_V=_supply_V(kept, calibration.supply[0]),
        clipped=kept.column("iclip") / kept.column("ni"),
        unsettled=(flags & flag_mask("unsettled")) != 0,
        ramp=(flags & flag_mask("ramp")) != 0,
        gap=gap,
        v_clipped=(flags & flag_mask("v_clipped")) != 0,
        range_V=np.asarray(box.ranges_V)[fine],
        u_offset_A=current.u_A,
        v_min_V=volts.of(kept.column("vmin")),
        v_max_V=volts.of(kept.column("vmax")),
        i_min_A=current.of(kept.column("imin")),
        i_max_A=current.of(kept.column("imax")),
        header=_header(kept, calibration, current, doubt),
    )


def _intervals(raw: RawTrace) -> tuple[Floats, Bools]:
    """Seconds each row averages over, and whether rows are missing before it."""
    box = reference_box()
    if not len(raw):
        return np.zeros(0), np.zeros(0, dtype=bool)
    own_s = np.maximum(raw.column("ni"), raw.column("nv")) * box.period_s
    since_s = np.diff(raw.column("t") / 1e3, prepend=raw.column("t")[0] / 1e3 - own_s[0])
    gap = since_s > _GAP_WINDOWS * box.window_s
    return np.where(gap, own_s, since_s), gap


def _supply_V(raw: RawTrace, scale: Scale) -> Floats:
    return np.asarray((raw.column("vs") - scale.offset_code) * scale.per_code, dtype=np.float64)


class _Volts:
    """The part's voltage, by the range each row was read on."""

    def __init__(self, raw: RawTrace, calibration: Calibration) -> None:
        fine = raw.column("vrange")
        self.per_code = np.asarray([scale.per_code for scale in calibration.volts])[fine]
        self.offset = np.asarray([scale.offset_code for scale in calibration.volts])[fine]

    def of(self, codes: Any) -> Floats:
        """Codes of every row to volts."""
        return np.asarray((codes - self.offset) * self.per_code)


class _Currents:
    """The shunt's current, by shunt, range and this run's own zero."""

    def __init__(self, raw: RawTrace, calibration: Calibration) -> None:
        self.unzeroed: list[tuple[int, int]] = []
        zeros = zeros_of(raw)
        size = len(raw)
        self.per_code, self.offset, self.u_A = np.ones(size), np.zeros(size), np.zeros(size)
        for (shunt, fine), scale in calibration.amps.items():
            rows = (raw.column("shunt") == shunt) & (raw.column("range") == fine)
            if not rows.any():
                continue
            offset, u_code = self._zero(zeros, (shunt, fine), scale)
            self.per_code[rows] = scale.per_code
            self.offset[rows] = offset
            self.u_A[rows] = u_code * scale.per_code

    def _zero(
        self, zeros: dict[tuple[int, int], tuple[float, float]], level: tuple[int, int], scale: Scale
    ) -> tuple[float, float]:
        if level in zeros:
            return zeros[level]
        self.unzeroed.append(level)
        return scale.offset_code, max(scale.u_offset_code, 3.0 / sqrt(3.0))

    def of(self, codes: Any) -> Floats:
        """Codes of every row to amperes."""
        return np.asarray((codes - self.offset) * self.per_code)


def zeros_of(raw: RawTrace) -> dict[tuple[int, int], tuple[float, float]]:
    """Offset and its standard uncertainty in codes by (shunt, range), from settled auto-zero rows."""
    names = code_names("stages")
    zero = next(code for code, name in names.items() if name == "zero")
    settled = (raw.column("flags") & (flag_mask("unsettled") | flag_mask("short_window"))) == 0
    rows = raw.rows[(raw.column("stage") == zero) & settled & (raw.column("iclip") == 0)]
    found: dict[tuple[int, int], tuple[float, float]] = {}
    for level in {(int(row[3]), int(row[4])) for row in rows}:
        of_level = rows[(rows[:, 3] == level[0]) & (rows[:, 4] == level[1])]
        count = float(of_level[:, 9].sum())
        spread = float((of_level[:, 12] - of_level[:, 11]).max())
        noise = max(spread / 4.0, _LEAST_NOISE_CODE)  # twenty readings span about four standard deviations
        found[level] = (float(of_level[:, 10].sum()) / count, sqrt(_CODE_U**2 + noise**2 / count))
    return found


def _said(raw: RawTrace, key: str) -> str | None:
    value = raw.info.get(key)
    return None if value is None else str(value)


def _fixture(raw: RawTrace, calibration: Calibration) -> dict[str, Any]:
    """The empty fixture at this run's voltage: its last zero there, else what the calibration says of it."""
    asked_V = raw.info.get("asked_V")
    zero = nearest(calibration.zeros, asked_V)
    if zero is None:
        return {"fixture_ohm": calibration.fixture_ohm, "u_fixture_rel": calibration.u_fixture_rel}
    now_utc = _said(raw, "time_utc")
    why = lapsed(zero.made_utc, zero.valid_h * 3600.0, now_utc)
    same = asked_V is None or zero.same_volts(asked_V)
    age = age_s(zero.made_utc, now_utc)
    told: dict[str, Any] = {
        "fixture_ohm": zero.ohm,
        "u_fixture_rel": zero.u_rel_when(why is None and same),
        "zero_V": zero.volts_V,
        "zero_utc": zero.made_utc,
    }
    if age is not None:
        told["zero_age_s"] = age
    if why is not None:
        told["zero_doubt"] = f"The empty fixture's zero {why}; its doubt is taken as of one never measured."
    return told


def _header(raw: RawTrace, calibration: Calibration, current: _Currents, doubt: str | None) -> dict[str, Any]:
    """What the trace says of box and run."""
    box = reference_box()
    header: dict[str, Any] = {
        "charge_ohm": box.charge_ohm,
        "divider_ohm": box.divider_ohm,
        "bleed_ohm": box.bleed_ohm,
        **_fixture(raw, calibration),
        "u_gain_v": max(scale.u_rel for scale in calibration.volts),
        "u_gain_i": max(scale.u_rel for scale in calibration.amps.values()),
        "calibration": calibration.id,
    }
    if doubt is not None:
        header["calibration_doubt"] = doubt
    temperature = part_temperature_C(raw)
    if temperature is not None:
        header["temperature_C"] = temperature
    if current.unzeroed:
        header["unzeroed"] = " ".join(f"{shunt}:{fine}" for shunt, fine in current.unzeroed)
    header.update({key: value for key, value in raw.info.items() if value is not None})
    return header


def part_temperature_C(raw: RawTrace) -> float | None:
    """Temperature beside the part, Celsius, mean of the run; None without a sane thermistor reading.

    Beta model R = R25 exp(B (1/T - 1/298.15 K)) with the pull-up's divider.
    """
    box = reference_box()
    codes = raw.column("temp")
    volts = float(np.median(codes[codes > 0])) * box.per_code_V(0) if np.any(codes > 0) else 0.0
    if not 0.02 * box.thermistor_feed_V < volts < 0.98 * box.thermistor_feed_V:
        return None
    ohm = box.thermistor_pull_ohm * volts / (box.thermistor_feed_V - volts)
    kelvin = 1.0 / (1.0 / 298.15 + np.log(ohm / box.thermistor_r25_ohm) / box.thermistor_b_K)
    return round(float(kelvin) - 273.15, 2)
