"""Capacitance from the whole charging curve: voltage and current fitted together, by a model that is averaged
as rows are.

Circuit: supply through Rc onto the high node, divider from there to ground, part and shunt in series. With Rp
= Rc || divider the current is I = (Vs Rp/Rc - V) / (Rp + Rs), linear in the part's voltage V, so V runs to
kappa Vs with tau = C (Rp + Rs) / (1 + G (Rp + Rs)). The supply rises at its slew, or at once. Every term has
a closed integral, and a row is the difference of two of them: models of instantaneous values are biased for
small time constants.

Free: C, leakage G, supply Vs, its beginning t0, and Rc within the box's tolerance. It needs Rc and is
therefore the low-noise result beside the charge balance, not instead of it.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import exp, hypot, sqrt

import numpy as np

from dwellbench.measure.charge import Stretch
from dwellbench.measure.estimate import Estimate
from dwellbench.measure.least_squares import Fit, least_squares
from dwellbench.measure.reference import FIXTURE_U_F, reference_box
from dwellbench.measure.trace import Circuit, Floats, Trace

_SLEWS = (0.0, 1e-4)  # seconds a volt: at once (another box's relay), or this box's supply at 10 V/ms
_GOOD = 1.5  # scatter below which the first that fits is taken
_TAUS = 6.0
_BEGUN = 0.002  # of the rise
_MOST_ROWS = 48  # more are averaged together: what fits needs is a few rows in each time constant
_LEAST_ROWS = 4
_RAMP_ROWS = 3  # a step shows its beginning in one row
_STILL = 1e-7  # a thousand times finer than anything the rows can say
_MOST_STEPS = 60  # a charging that fits does so in ten
_NOISE_CODE = 0.25  # of a row's mean: a code in a single reading, twenty readings
_MODEL = 2e-4  # of the step: what ripple, drift and converter bends do to single rows
_NO_SENSE = 1e60  # residual of parameters that no circuit has
_WORST_U = 0.1  # relative doubt above which the curve says nothing of the capacitance


@dataclass(frozen=True)
class Curve:
    """What the fit found: farads and siemens with standard uncertainties, the beginning in seconds, and how
    well it fits.
    """

    capacitance: Estimate
    leak_S: float
    u_leak_S: float
    begin_s: float
    tau_s: float
    scatter: float


def fit_curve(trace: Trace, circuit: Circuit, stretch: Stretch | None, guess_F: float | None) -> Curve | None:
    """Fit the charging by a step of the supply; None when there is none, it was a ramp, or nothing fits.

    `guess_F` is the charge balance's capacitance, where the search begins.
    """
    if stretch is None or not guess_F or guess_F <= 0.0 or _ramped(trace, stretch):
        return None
    rows = _Rows(trace, circuit, stretch, guess_F)
    if rows.count < _LEAST_ROWS:
        return None
    best: Fit | None = None
    for slew_s_per_V in _SLEWS if trace.text("box") is None else reversed(_SLEWS):
        fit = _fit(rows, circuit, guess_F, slew_s_per_V)
        if fit is not None and (best is None or fit.chi2 < best.chi2):
            best = fit
        if best is not None and best.scatter < _GOOD:
            break
    return None if best is None else _curve(best, rows, circuit)


def _ramped(trace: Trace, stretch: Stretch) -> bool:
    """Whether the supply was still rising while the part charged: marked so, or read so."""
    rows = slice(stretch.first, stretch.last + 1)
    if trace.ramp[rows].any():
        return True
    share = trace.across_V[rows] / max(float(trace.across_V[rows].max()), 1e-9)
    charging = trace.v_supply_V[rows][(share > 0.1) & (share < 0.9)]
    return int(np.sum(charging < 0.9 * trace.v_supply_V[stretch.last])) >= _RAMP_ROWS


class _Rows:
    """The rows of the charging, averaged together where there are many; volts of the high node, amperes."""

    def __init__(self, trace: Trace, circuit: Circuit, stretch: Stretch, guess_F: float) -> None:
        self.shunt_ohm = float(trace.shunt_ohm[stretch.first])
        tau_s = guess_F * (circuit.thevenin_ohm + self.shunt_ohm)
        volts = trace.across_V[stretch.first : stretch.last + 1]
        rise_V = float(volts[-1] - volts[0])
        begin = stretch.first + max(int(np.argmax(volts > volts[0] + _BEGUN * rise_V)) - 1, 0)
        # a record that begins with the step itself is taken to begin with a part that was bled
        self.start_V = float(volts[0]) if abs(float(volts[0])) < _BEGUN * rise_V else 0.0
        until_s = float(trace.t_s[begin]) + _TAUS * tau_s + 2.0 * float(trace.interval_s[begin])
        last = begin + int(np.searchsorted(trace.t_s[begin : stretch.last + 1], until_s))
        rows = np.arange(begin, min(last, stretch.last) + 1)
        groups = np.array_split(rows, min(rows.size, _MOST_ROWS))
        self.count = len(groups)
        weight = [trace.interval_s[group] for group in groups]
        self.end_s = np.array([float(trace.t_s[group[-1]]) for group in groups])
        self.dt = np.array([float(w.sum()) for w in weight])
        self.node_V = np.array(
            [np.average(trace.v_part_V[g], weights=w) for g, w in zip(groups, weight, strict=True)]
        )
        self.amps = np.array(
            [np.average(trace.i_shunt_A[g], weights=w) for g, w in zip(groups, weight, strict=True)]
        )
        box = reference_box()
        many = np.sqrt([group.size for group in groups])
        step_V = float(trace.v_part_V[stretch.last])
        code_V = _NOISE_CODE * box.per_code_V(0) * box.divider_ratio
        code_A = _NOISE_CODE * float(trace.range_V[begin]) / 32768.0 / self.shunt_ohm
        self.u_V = np.hypot(code_V / many, _MODEL * step_V)
        self.u_A = np.hypot(code_A / many, _MODEL * step_V / circuit.charge_ohm)
        self.first_s = float(trace.t_s[begin])
        self.tau_s = tau_s


def _fit(rows: _Rows, circuit: Circuit, guess_F: float, slew_s_per_V: float) -> Fit | None:
    """Parameters: ln C, G, Vs, t0 (seconds), ln(Rc / nominal)."""
    supply_V = (
        float(rows.node_V[-1] + rows.amps[-1] * circuit.charge_ohm)
        * circuit.charge_ohm
        / circuit.thevenin_ohm
    )
    u_rc = max(hypot(circuit.u_gain_v, circuit.u_gain_i), 0.01)
    gs = 1e-3 / circuit.charge_ohm
    floor_S = -1e-6

    def residuals(p: Floats) -> Floats:
        if abs(p[0]) > 3.0 or not floor_S < p[1] < 1.0 or not 0.0 < p[2] < 1e4 or abs(p[4]) > 0.5:
            return np.full(2 * rows.count + 1, _NO_SENSE)
        node_V, amps = charged(
            rows,
            circuit,
            guess_F * exp(p[0]),
            float(p[1]),
            float(p[2]),
            float(p[3]),
            circuit.charge_ohm * exp(p[4]),
            slew_s_per_V,
        )
        return np.concatenate(
            ((node_V - rows.node_V) / rows.u_V, (amps - rows.amps) / rows.u_A, [p[4] / u_rc])
        )

    start = np.array([0.0, 0.0, supply_V, rows.first_s - slew_s_per_V * supply_V / 2.0, 0.0])
    scale = np.array([1.0, gs, supply_V, max(rows.tau_s, 0.01), 1.0])
    return least_squares(residuals, start, scale, still=_STILL, most_steps=_MOST_STEPS)


def charged(
    rows: _Rows,
    circuit: Circuit,
    farads: float,
    leak_S: float,
    supply_V: float,
    begin_s: float,
    charge_ohm: float,
    slew_s_per_V: float,
) -> tuple[Floats, Floats]:
    """Means of the high node's voltage and of the current over the rows' intervals."""
    parallel = 1.0 / (1.0 / charge_ohm + 1.0 / circuit.divider_ohm)
    loop = parallel + rows.shunt_ohm
    tau_s = farads * loop / (1.0 + leak_S * loop)
    kappa = parallel / charge_ohm / (1.0 + leak_S * loop)
    rise_s = supply_V * slew_s_per_V

    edges = np.concatenate((rows.end_s[:1] - rows.dt[:1], rows.end_s)) - begin_s
    part_Vs, supply_Vs = _integrals(edges, rows.start_V, kappa * supply_V, supply_V, tau_s, rise_s)
    part_V = np.diff(part_Vs) / np.diff(edges)
    amps = (np.diff(supply_Vs) / np.diff(edges) * parallel / charge_ohm - part_V) / loop
    return np.asarray(part_V + amps * rows.shunt_ohm), np.asarray(amps)


def _integrals(
    u: Floats, start_V: float, goal_V: float, supply_V: float, tau_s: float, rise_s: float
) -> tuple[Floats, Floats]:
    """Integrals since the supply's beginning (u = 0) of the part's voltage and of the supply's."""
    ramp = np.clip(u, 0.0, rise_s)
    flat = np.maximum(u - rise_s, 0.0)
    before = np.minimum(u, 0.0)
    supply = supply_V * flat
    risen = -np.expm1(-ramp / tau_s)  # 1 - e^(-t/tau)
    part = start_V * before + start_V * tau_s * risen
    at_V = start_V * exp(-rise_s / tau_s)
    if rise_s > 0.0:
        slope = goal_V / rise_s
        part = part + slope * (0.5 * ramp**2 - tau_s * ramp + tau_s**2 * risen)
        supply = supply + 0.5 * supply_V / rise_s * ramp**2
        at_V += slope * (rise_s + tau_s * float(np.expm1(-rise_s / tau_s)))
    part = part + goal_V * flat - (at_V - goal_V) * tau_s * np.expm1(-flat / tau_s)
    return np.asarray(part), np.asarray(supply)


def _curve(fit: Fit, rows: _Rows, circuit: Circuit) -> Curve | None:
    loop = circuit.thevenin_ohm + rows.shunt_ohm
    guess_F = rows.tau_s / loop
    farads = guess_F * exp(float(fit.parameters[0]))
    if not np.isfinite(fit.covariance).all() or fit.u(0) > _WORST_U:
        return None
    u_own = sqrt((farads * fit.u(0)) ** 2 + FIXTURE_U_F**2)
    shared = farads * hypot(circuit.u_gain_v, circuit.u_gain_i)
    estimate = Estimate(farads - circuit.fixture_F, u_own, shared, rows.count)
    return Curve(
        estimate, float(fit.parameters[1]), fit.u(1), float(fit.parameters[3]), farads * loop, fit.scatter
    )
