"""Scales of a box from runs on references: volts against a meter across the clips, amperes against known resistors.

The voltage comes first, with the meter connected and whatever it hangs on. Then the meter goes, for its own resistance would
pass current too, and a resistor's current is the voltage, now known, over its resistance, and the empty fixture's beside it.
What the points of a scale have in common (the meter's gain, the resistor's value) does not average out and is added afterwards.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import hypot, sqrt
from typing import Any

import numpy as np

from dwellbench.errors import UsageError
from dwellbench.measure.calibrate import zeros_of
from dwellbench.measure.calibration import Calibration, Scale
from dwellbench.measure.raw import RawTrace
from dwellbench.measure.reference import code_names, flag_mask, reference_box
from dwellbench.measure.straight_line import StraightLine, weighted_line

_LEAST_ROWS = 10
_CODE_U = 1.0 / sqrt(12.0)
_BEAT_ROWS = 5.0  # ripple beats with the sampling over about this many rows
_AGREE = 2.0  # standard uncertainties of a difference beyond which two calibrations disagree

Level = tuple[int, int]


@dataclass(frozen=True)
class Steady:
    """Mean codes of the last half of a dwell, with their standard uncertainties. `level`: shunt and range; None for clipped."""

    volts_fine: int
    volts: float
    u_volts: float
    level: Level
    amps: float
    u_amps: float
    zero: float
    u_zero: float


def steady(raw: RawTrace) -> Steady:
    """What a run on a reference says, in codes. Raises UsageError when it held no steady voltage."""
    names = code_names("stages")
    dwell = next(code for code, name in names.items() if name == "dwell")
    bad = flag_mask("unsettled") | flag_mask("v_clipped")
    late = raw.rows[(raw.column("stage") == dwell) & (raw.column("nv") > 0) & (raw.column("ni") > 0)]
    late = late[len(late) // 2 :]
    if len(late):
        last = late[-1]
        same = (late[:, 3] == last[3]) & (late[:, 4] == last[4]) & (late[:, 17] == last[17])
        late = late[same & ((late[:, 16] & bad) == 0) & (late[:, 13] == 0)]
    if len(late) < _LEAST_ROWS:
        raise UsageError(
            f"The run held no steady reading (it ended with {raw.info.get('end')}).",
            remedy="See that the reference is connected and dry, and hold the voltage longer, with --dwell 20.",
        )
    level = (int(late[-1, 3]), int(late[-1, 4]))
    zeros = zeros_of(raw)
    if level not in zeros:
        raise UsageError("The run has no zero of the range it ended on.", remedy="Run it again.")
    return Steady(
        int(late[-1, 17]),
        *_mean(late[:, 6] / late[:, 5]),
        level,
        *_mean(late[:, 10] / late[:, 9]),
        *zeros[level],
    )


def _mean(codes: Any) -> tuple[float, float]:
    u_mean = float(np.std(codes, ddof=1)) * sqrt(min(_BEAT_ROWS / codes.size, 1.0))
    return float(np.mean(codes)), hypot(u_mean, _CODE_U / sqrt(codes.size))


@dataclass(frozen=True)
class Met:
    """A run with the reference meter across the clips: its codes and what the meter read, `u_V` without the meter's gain."""

    at: Steady
    volts_V: float
    u_V: float


@dataclass(frozen=True)
class Known:
    """A run on a reference resistor, without the meter; `u_rel` of its resistance."""

    at: Steady
    ohm: float
    u_rel: float


def volts_scales(runs: Sequence[Met], u_meter_rel: float) -> dict[int, Scale]:
    """Scales of the part's divider by range, for every range that was met at two voltages or more."""
    made = {}
    for fine in (0, 1):
        of = [run for run in runs if run.at.volts_fine == fine]
        if len({run.volts_V for run in of}) < 2:
            continue
        per_code = reference_box().per_code_V(fine) * reference_box().divider_ratio
        u_V = [hypot(run.u_V, run.at.u_volts * per_code, 1e-6) for run in of]
        fit = weighted_line([run.at.volts for run in of], [run.volts_V + _shunt_V(run.at) for run in of], u_V)
        made[fine] = _scale(fit, u_meter_rel)
    return made


def amps_scales(runs: Sequence[Known], calibration: Calibration) -> dict[Level, Scale]:
    """Scales of the shunts by level, for every level that a resistor was read on; the run's own zero is a point of the line.

    `calibration` gives the volts (fitted before) and the empty fixture.
    """
    made = {}
    for level in sorted({run.at.level for run in runs}):
        of = [run for run in runs if run.at.level == level]
        codes, amps, u_A = [], [], []
        per_code = reference_box().per_code_V(level[1]) / reference_box().shunts_ohm[level[0]]
        common = 0.0
        for run in of:
            volts = calibration.volts[run.at.volts_fine]
            across_V = (run.at.volts - volts.offset_code) * volts.per_code
            across_V -= _shunt_V(run.at)
            siemens = 1.0 / run.ohm + 1.0 / calibration.fixture_ohm
            u_V = hypot(run.at.u_volts, volts.u_offset_code) * volts.per_code
            fixture_A = across_V / calibration.fixture_ohm
            codes += [run.at.amps, run.at.zero]
            amps += [across_V * siemens, 0.0]
            u_A.append(hypot(u_V * siemens, run.at.u_amps * per_code, fixture_A * calibration.u_fixture_rel))
            u_A.append(run.at.u_zero * per_code)
            common = max(common, hypot(run.u_rel, volts.u_rel))
        made[level] = _scale(weighted_line(codes, amps, u_A), common)
    return made


def _shunt_V(at: Steady) -> float:
    """What stands on the shunt: the divider reads the high node to ground, meter and resistor stand above the shunt.

    By the converter's nominal gain: 0.2 % of a volt at most.
    """
    return (at.amps - at.zero) * reference_box().per_code_V(at.level[1])


def _scale(fit: StraightLine, common_rel: float) -> Scale:
    return Scale(
        per_code=fit.slope,
        offset_code=fit.root,
        u_rel=hypot(fit.u_slope / fit.slope, common_rel),
        u_offset_code=fit.u_root,
        r=fit.r,
        common_rel=common_rel,
        points=fit.points,
    )


def with_scales(
    calibration: Calibration, volts: Mapping[int, Scale], amps: Mapping[Level, Scale]
) -> Calibration:
    """The calibration with the scales that were fitted in place of its own; the others stay as they were."""
    wide, fine = (volts.get(k, calibration.volts[k]) for k in (0, 1))
    return replace(calibration, volts=(wide, fine), amps={**calibration.amps, **amps})


def disagreements(last: Calibration, now: Calibration) -> list[str]:
    """Sentences for every scale that has changed by more than the doubt of both."""
    box = reference_box()
    pairs = {f"volts, range {box.ranges_V[k]:g} V": (last.volts[k], now.volts[k]) for k in (0, 1)}
    for (shunt, k), scale in now.amps.items():
        pairs[f"shunt {box.shunts_ohm[shunt]:g} ohm, range {box.ranges_V[k]:g} V"] = (
            last.amps[shunt, k],
            scale,
        )
    told = []
    for name, (old, new) in pairs.items():
        change = new.per_code / old.per_code - 1.0
        doubt = _AGREE * hypot(old.u_rel, new.u_rel)
        if abs(change) > doubt:
            told.append(
                f"{name}: the gain changed by {100.0 * change:+.3g} %, and {100.0 * doubt:.2g} % would be within the doubt of both."
            )
    return told
