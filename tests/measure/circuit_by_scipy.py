"""Rows of a charging by a general solver of differential equations: no noise, no formula of the estimators."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.integrate import solve_ivp

from dwellbench.measure.trace import Trace

CHARGE_OHM, DIVIDER_OHM = 400e3, 100.1e6


@dataclass(frozen=True)
class Setup:
    """A step (or slew) of the supply at `begin_s` onto a part; rows of `interval_s` until `end_s`."""

    capacitance_F: float
    leak_S: float = 0.0
    supply_V: float = 400.0
    begin_s: float = 0.237
    slew_V_per_s: float = 1e4
    shunt_ohm: float = 560.0
    interval_s: float = 0.1
    end_s: float = 5.0
    start_V: float = 0.0
    charge_ohm: float = CHARGE_OHM


def rows(setup: Setup) -> dict[str, np.ndarray]:
    """Means over the rows: t_s, v_part_V, i_shunt_A, v_supply_V."""
    s = setup

    def supply(t: float) -> float:
        return float(np.clip((t - s.begin_s) * s.slew_V_per_s, 0.0, s.supply_V))

    def current(part_V: float, t: float) -> float:
        # Kirchhoff at the high node: (Vs - Vh)/Rc = Vh/Rd + I, Vh = V + I Rs; the relay is open before the supply comes
        if t < s.begin_s:
            return s.leak_S * part_V
        a = 1.0 / s.charge_ohm + 1.0 / DIVIDER_OHM
        return (supply(t) / s.charge_ohm - a * part_V) / (1.0 + a * s.shunt_ohm)

    def slope(t: float, y: np.ndarray) -> list[float]:
        amps = current(y[0], t)
        return [(amps - s.leak_S * y[0]) / s.capacitance_F, y[0], amps, supply(t)]

    edges = np.arange(0.0, s.end_s + 1e-9, s.interval_s)
    kinks = [0.0, s.begin_s, s.begin_s + s.supply_V / s.slew_V_per_s, s.end_s]
    marks, state, found = [], np.array([s.start_V, 0.0, 0.0, 0.0]), []
    for begin, end in pairwise(kinks):
        inside = edges[(edges >= begin) & (edges < end)]
        times = np.unique(np.concatenate((inside, [end])))
        solved = solve_ivp(slope, (begin, end), state, t_eval=times, method="LSODA", rtol=1e-10, atol=1e-13)
        marks.append(times[:-1])
        found.append(solved.y[:, :-1])
        state = solved.y[:, -1]
    at = np.concatenate([*marks, [s.end_s]])
    y = np.column_stack([*found, state[:, None]])
    keep = np.array([np.argmin(np.abs(at - edge)) for edge in edges])
    means = np.diff(y[1:, keep], axis=1) / s.interval_s
    return {
        "t_s": edges[1:],
        "v_part_V": means[0] + means[1] * s.shunt_ohm,
        "i_shunt_A": means[1],
        "v_supply_V": means[2],
    }


def trace_of(setup: Setup, stage: str = "charge", **header: object) -> Trace:
    """A trace with these rows, all of one stage."""
    made = rows(setup)
    size = made["t_s"].size
    none, nan = np.zeros(size, dtype=bool), np.full(size, np.nan)
    return Trace(
        **made,
        interval_s=np.full(size, setup.interval_s),
        stage=np.full(size, stage, dtype="<U8"),
        shunt_ohm=np.full(size, setup.shunt_ohm),
        clipped=np.zeros(size),
        unsettled=none,
        ramp=none,
        gap=none,
        v_clipped=none,
        range_V=np.full(size, 1.024),
        u_offset_A=np.full(size, 1e-12),
        v_min_V=nan,
        v_max_V=nan,
        i_min_A=nan,
        i_max_A=nan,
        header={"u_gain_v": 0.0, "u_gain_i": 0.0, "fixture_F": 0.0, **header},
    )
