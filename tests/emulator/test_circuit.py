"""The circuit's exact steps against a general solver of differential equations, on equations written down
anew here."""

from __future__ import annotations

from dataclasses import dataclass
from math import cos, pi

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from dwellbench.emulator.circuit import Circuit
from dwellbench.emulator.circuit_state import PERIOD_S, Plates
from dwellbench.emulator.network import CHARGE_MADE, CHARGE_NONE, CHARGE_REST, Switches, Values
from dwellbench.emulator.part_spec import Superlinear
from dwellbench.emulator.parts import PowerLaw

STRAY, FIXTURE, LOW, CLAMP_OHM = 10e-12, 2e-12, 100e-12, 10.0
OMEGA = 2 * pi * 50.0
MAINS_A, RIPPLE_V = 3e-10, 0.05
WINDOWS = (4.2e-3, 3.8e-3)


def film(farad: float = 47e-9, ohm: float = 3e10) -> Values:
    """A box as drawn with a film part in it, absorbing 0.2 % a decade."""
    ladder = tuple((tau / (0.002 * farad), 0.002 * farad) for tau in (0.05, 0.5, 5.0, 50.0))
    return Values(4e5, (22e3, 22e3), 100.1e6, 100.1e6, (560.0, 1e5, 1e6), 1e12, farad, 0.5, ohm, ladder)


@dataclass
class Equations:
    """Kirchhoff's laws at the plates p and l, the ladder's capacitors and the supply's output; h follows
    from them.

    State x = [p, l, ladder..., s, integral of h, integral of l].
    """

    values: Values
    power: Superlinear | None = None

    def high(self, k: Switches, p: float, s: float) -> float:
        v = self.values
        siemens, amps = 1 / v.esr_ohm + 1 / v.divider_ohm, p / v.esr_ohm
        if k.charge == CHARGE_MADE:
            siemens, amps = siemens + 1 / v.charge_ohm, amps + s / v.charge_ohm
        siemens += (1 / v.bleed_ohm[0] if k.bleed else 0.0) + (
            1 / v.bleed_ohm[1] if k.charge == CHARGE_REST else 0.0
        )
        return amps / siemens

    def slope(
        self, x: np.ndarray, k: Switches, s_on: float, mains_A: float, counted: tuple[bool, bool]
    ) -> np.ndarray:
        """dx/dt of the linear network, with what is beyond `counted` not integrated."""
        v = self.values
        p, low, ladder = x[0], x[1], x[2 : 2 + len(v.ladder)]
        s = s_on if k.supply_on else x[-3]
        h, u = self.high(k, p, s), p - low
        through = (
            u / v.leakage_ohm
            + u / v.fixture_ohm
            + sum((u - d) / r for d, (r, _) in zip(ladder, v.ladder, strict=True))
        )
        into_l = -low / v.shunts_ohm[k.shunt] + through + mains_A
        dp, dl = np.linalg.solve(self.plates(), [(h - p) / v.esr_ohm - through, into_l])
        dd = [(u - d) / (ohm * farad) for d, (ohm, farad) in zip(ladder, v.ladder, strict=True)]
        drain = (
            s / 1e7 + s / v.supply_divider_ohm + ((s - h) / v.charge_ohm if k.charge == CHARGE_MADE else 0.0)
        )
        ds = 0.0 if k.supply_on else -drain / 10e-9
        return np.array([dp, dl, *dd, ds, h * counted[0], low * counted[1]])

    def plates(self) -> np.ndarray:
        """The capacitance matrix of p and l."""
        c = self.values.capacitance_F + FIXTURE
        return np.array([[STRAY + c, -c], [-c, LOW + c]])

    def beyond(self, x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Clamp and power law: their part of dx/dt, and its derivative by (p, l)."""
        u, low = x[0] - x[1], x[1]
        clamp = (low - 5.0) / CLAMP_OHM if low > 5.0 else (low + 5.0) / CLAMP_OHM if low < -5.0 else 0.0
        amps = siemens = 0.0
        if self.power:
            amps = (abs(u) / self.power.at_V) ** self.power.exponent * self.power.at_V / self.power.ohm_there
            siemens = self.power.exponent * amps / max(abs(u), 1e-9)
        by = [[-siemens, siemens], [siemens, -siemens - (1 / CLAMP_OHM if clamp else 0.0)]]
        inverse = np.linalg.inv(self.plates())
        return inverse @ [-amps, amps - clamp], inverse @ by

    def period(
        self, x: np.ndarray, k: Switches, s: float, r: float, t0: float
    ) -> tuple[np.ndarray, float, float]:
        """State after 5 ms that begin at `t0`, means of h and l over the converters' windows."""
        for span in [(0.0, WINDOWS[1]), (WINDOWS[1], WINDOWS[0]), (WINDOWS[0], PERIOD_S)]:
            x = self.solve(x, k, s, r, t0, span)
        return np.array([*x[:-2], 0.0, 0.0]), x[-2] / WINDOWS[0], x[-1] / WINDOWS[1]

    def solve(
        self, x: np.ndarray, k: Switches, s: float, r: float, t0: float, span: tuple[float, float]
    ) -> np.ndarray:
        """State at the end of `span`, seconds into the period that begins at `t0`."""
        counted = (span[1] <= WINDOWS[0], span[1] <= WINDOWS[1])
        zero = np.zeros(len(x))
        a = np.array([self.slope(e, k, 0.0, 0.0, counted) for e in np.eye(len(x))]).T
        by_s = self.slope(zero, k, 1.0, 0.0, counted)
        by_mains = self.slope(zero, k, 0.0, 1.0, counted)

        def f(t: float, x: np.ndarray) -> np.ndarray:
            supply = s + r * t + RIPPLE_V * cos(2 * OMEGA * (t0 + t))
            d = a @ x + by_s * supply + by_mains * (MAINS_A * cos(OMEGA * (t0 + t)))
            d[:2] += self.beyond(x)[0]
            return d

        def jacobian(t: float, x: np.ndarray) -> np.ndarray:
            j = a.copy()
            j[:2, :2] += self.beyond(x)[1]
            return j

        got = solve_ivp(f, span, x, method="Radau", jac=jacobian, rtol=3e-9, atol=1e-10)
        return got.y[:, -1]


def circuit(values: Values) -> Circuit:
    return Circuit(values, OMEGA, WINDOWS, complex(MAINS_A), complex(RIPPLE_V))


CHARGING = Switches(charge=CHARGE_MADE, bleed=False, supply_on=True)
SEQUENCE = [  # contacts, slope of the supply V/s, periods
    (Switches(supply_on=True), 0.0, 1),
    (CHARGING, 1e4, 6),
    (CHARGING, 0.0, 4),
    (CHARGING._replace(shunt=1), 0.0, 2),
    (CHARGING._replace(shunt=2), -20.0, 3),
    (CHARGING._replace(shunt=2, supply_on=False), 0.0, 2),
    (Switches(charge=CHARGE_NONE, bleed=False, shunt=2), 0.0, 1),
    (Switches(shunt=2), 0.0, 4),  # the low node strikes the clamp here
    (Switches(shunt=0), 0.0, 2),
    (Switches(charge=CHARGE_NONE, bleed=False, shunt=2), 0.0, 3),  # rebound of absorption
]


def follow(c: Circuit, eq: Equations, sequence: list, least_v: float) -> float:
    """Run both through the sequence; the greatest disagreement of means and states, as a share of (value +
    least_v)."""
    x = np.zeros(5 + len(eq.values.ladder))
    s, worst, t = 0.0, 0.0, 0.0
    for k, r, periods in sequence:
        x[-3] = 0.0 if k.supply_on else s
        c.set_slope(r)
        c.switch(k)
        for _ in range(periods):
            x, high, low = eq.period(x, k, s, r, t)
            c.period()
            t += PERIOD_S
            s = s + r * PERIOD_S if k.supply_on else x[-3]
            across, low_now, plates = c.states()
            pairs = [(across, x[0] - x[1]), (low_now, x[1]), (c.s, s), (c.high_mean, high), (c.low_mean, low)]
            pairs += list(zip(plates.ladder_V, x[2:-3], strict=True))
            worst = max(worst, *(abs(a - b) / (abs(b) + least_v) for a, b in pairs))
    return worst


@pytest.mark.parametrize("farad", [200e-12, 47e-9, 4.7e-6])
def test_linear_part_through_charge_dwell_shunts_discharge_rebound(farad):
    values = film(farad)
    assert follow(circuit(values), Equations(values), SEQUENCE, 0.01) < 1e-5


def test_superlinear_part_agrees_with_the_equations():
    values, power = film(47e-9), Superlinear(300.0, 2.7e7, 6.0)
    c = circuit(values)
    c.fit(values, PowerLaw(power), Plates(0.0, [0.0] * 4))
    sequence = [(CHARGING, 1e4, 6), (CHARGING, 0.0, 20), (CHARGING._replace(shunt=1), 0.0, 4)]
    assert follow(c, Equations(values, power), sequence, 1.0) < 3e-3
