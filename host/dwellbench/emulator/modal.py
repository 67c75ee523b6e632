"""A network taken apart into modes: exact steps of any length, exact window means, one generated function
for a whole period.

State `y` is a tuple, one number a mode: what is left of the mode after everything forced is taken off, so
between switchings a period is one product a mode. Forced are: the supply s(t) = s0 + r t (through `at_s`,
`at_r`), the clamp, and two sinusoids that are exact phasors: ripple of the supply and mains current into
the low node. A nonlinear branch's current j, held over the step, is added by `kick`.
"""

from __future__ import annotations

from cmath import rect
from collections.abc import Callable, Sequence
from functools import lru_cache
from typing import NamedTuple

from dwellbench.emulator.modes import (
    cholesky,
    decay,
    decay_double,
    decay_integral,
    eigen_symmetric,
    solve_lower,
    solve_upper,
)
from dwellbench.emulator.network import Network, Row

Modes = tuple[float, ...]
Step = Callable[..., tuple[Modes, float, float]]


class Drive(NamedTuple):
    """What is forced, at one instant: supply V and its slope V/s; ripple V and mains A as cosine and sine
    parts."""

    s: float
    r: float
    ripple: complex
    mains: complex


class Output:
    """One node voltage as a function of the modes and the drive."""

    def __init__(self, modal: Modal, row: Row) -> None:
        self.modes = [sum(a * modal.shape[i][k] for i, a in row.states.items()) for k in range(modal.size)]
        self.s = row.supply + _dot(self.modes, modal.at_s)
        self.r = _dot(self.modes, modal.at_r)
        self.clamp = _dot(self.modes, modal.at_clamp)
        self.ripple = row.supply + _cdot(self.modes, modal.at_ripple)
        self.mains = _cdot(self.modes, modal.at_mains)

    def now(self, y: Modes, d: Drive) -> float:
        """Volts at this instant."""
        forced = self.s * d.s + self.r * d.r + self.clamp
        return _dot(self.modes, y) + forced + (self.ripple * d.ripple + self.mains * d.mains).real


def _dot(a: Sequence[float], b: Sequence[float]) -> float:
    return sum(x * y for x, y in zip(a, b, strict=True))


def _cdot(a: Sequence[float], b: Sequence[complex]) -> complex:
    return sum((x * y for x, y in zip(a, b, strict=True)), 0j)


class Modal:
    """Modes of one network, with mains at `mains_rad_s` and ripple at twice that."""

    def __init__(self, net: Network, mains_rad_s: float) -> None:
        self.net, self.size = net, net.size
        self.omega = mains_rad_s
        n = range(net.size)
        low = cholesky(net.capacitance)
        half = [solve_lower(low, list(column)) for column in zip(*net.conductance, strict=True)]
        whole = [solve_lower(low, [half[j][i] for j in n]) for i in n]
        self.rate, turn = eigen_symmetric([[0.5 * (whole[i][j] + whole[j][i]) for j in n] for i in n])
        columns = [solve_upper(low, [turn[i][k] for i in n]) for k in n]
        self.shape = [[columns[k][i] for k in n] for i in n]  # x = shape y
        self.back = [[sum(turn[i][k] * low[j][i] for i in range(j + 1)) for j in n] for k in n]  # y = back x
        supply = [_dot(columns[k], net.from_supply) for k in n]
        low_node = [self.shape[1][k] for k in n]  # force of a current into the low node
        self.at_s = [f / rate for f, rate in zip(supply, self.rate, strict=True)]
        self.at_r = [-f / rate for f, rate in zip(self.at_s, self.rate, strict=True)]
        self.at_clamp = [_dot(columns[k], net.from_clamp) / self.rate[k] for k in n]
        self.at_ripple = [supply[k] / complex(self.rate[k], 2.0 * mains_rad_s) for k in n]
        self.at_mains = [low_node[k] / complex(self.rate[k], mains_rad_s) for k in n]
        self.high, self.low = Output(self, net.high), Output(self, net.low)
        self.plate = Output(self, Row({net.plate: 1.0}))
        self.supply = Output(self, Row({net.supply_state: 1.0})) if net.supply_state >= 0 else None
        self.plate_force = [
            -self.shape[net.plate][k] for k in n
        ]  # of one ampere of conduction through the part

    def forced(self, d: Drive) -> list[float]:
        """The forced part of every mode."""
        return [
            s * d.s + r * d.r + c + (p * d.ripple + m * d.mains).real
            for s, r, c, p, m in zip(
                self.at_s, self.at_r, self.at_clamp, self.at_ripple, self.at_mains, strict=True
            )
        ]

    def enter(self, x: Sequence[float], d: Drive) -> Modes:
        """Modes of the states `x` (network.py's order, volts)."""
        return tuple(_dot(row, x) - f for row, f in zip(self.back, self.forced(d), strict=True))

    def leave(self, y: Modes, d: Drive) -> list[float]:
        """States of the modes `y`."""
        total = [a + b for a, b in zip(y, self.forced(d), strict=True)]
        return [_dot(row, total) for row in self.shape]

    def turn(self, d: Drive, time: float) -> Drive:
        """The drive `time` seconds later."""
        one = _phase(self.omega * time)
        return Drive(d.s + d.r * time, d.r, d.ripple * one * one, d.mains * one)

    def after(self, y: Modes, time: float, j: float = 0.0) -> Modes:
        """Modes `time` seconds later, with `j` amperes of nonlinear conduction throughout."""
        if not j:
            return tuple(a * decay(rate, time) for a, rate in zip(y, self.rate, strict=True))
        return tuple(
            a * decay(rate, time) + j * f * decay_integral(rate, time)
            for a, rate, f in zip(y, self.rate, self.plate_force, strict=True)
        )

    def integral(self, out: Output, y: Modes, d: Drive, time: float, j: float = 0.0) -> float:
        """Integral of `out` over the next `time` seconds, volt seconds."""
        total = (out.s * (d.s + 0.5 * d.r * time) + out.r * d.r + out.clamp) * time
        total += (out.ripple * d.ripple * _phase_integral(2.0 * self.omega, time)).real
        total += (out.mains * d.mains * _phase_integral(self.omega, time)).real
        for c, a, rate, f in zip(out.modes, y, self.rate, self.plate_force, strict=True):
            total += c * a * decay_integral(rate, time)
            if j:
                total += c * j * f * decay_double(rate, time)
        return total


def _phase(angle: float) -> complex:
    return rect(1.0, angle)


def _phase_integral(omega: float, time: float) -> complex:
    """Integral of exp(i omega t) from 0 to `time`."""
    return (_phase(omega * time) - 1.0) / complex(0.0, omega)


_TEMPLATE = """
def make({coefficients}):
    def step(y, s, r, rc, rs, mc, ms, j):
        {y} = y
        return (
            ({after},),
            {high},
            {low},
        )
    return step
"""


@lru_cache(maxsize=64)
def _maker(size: int, driven: bool, kicked: bool) -> Callable[..., Step]:
    """Unrolled source for networks of `size` modes, with the supply's terms if `driven`, with conduction
    if `kicked`."""
    n = range(size)
    after = [f"y{k}*e{k}" + (f"+j*k{k}" if kicked else "") for k in n]
    names = [f"e{k}" for k in n] + ([f"k{k}" for k in n] if kicked else [])
    rows = []
    for q in "hl":
        terms = [f"{q}{k}*y{k}" for k in n] + [f"{q}mc*mc", f"{q}ms*ms"]
        own = [f"{q}{k}" for k in n] + [f"{q}mc", f"{q}ms"]
        if driven:
            terms += [f"{q}s*s", f"{q}r*r", f"{q}rc*rc", f"{q}rs*rs"]
            own += [f"{q}s", f"{q}r", f"{q}rc", f"{q}rs"]
        if kicked:
            terms.append(f"{q}j*j")
            own.append(f"{q}j")
        names += own
        rows.append("+".join(terms))
    source = _TEMPLATE.format(
        coefficients=", ".join(names),
        y=", ".join(f"y{k}" for k in n) + ("," if size == 1 else ""),
        after=", ".join(after),
        high=rows[0],
        low=rows[1],
    )
    scope: dict[str, Callable[..., Step]] = {}
    exec(compile(source, f"<step of {size} modes>", "exec"), scope)  # our own text, nothing from outside
    return scope["make"]


def _mean_coefficients(modal: Modal, out: Output, time: float, driven: bool, kicked: bool) -> list[float]:
    mains = out.mains * _phase_integral(modal.omega, time) / time
    values = [c * decay_integral(rate, time) / time for c, rate in zip(out.modes, modal.rate, strict=True)]
    values += [mains.real, -mains.imag]
    if driven:
        ripple = out.ripple * _phase_integral(2.0 * modal.omega, time) / time
        values += [out.s, out.s * 0.5 * time + out.r, ripple.real, -ripple.imag]
    if kicked:
        parts = zip(out.modes, modal.plate_force, modal.rate, strict=True)
        values.append(sum(c * f * decay_double(rate, time) for c, f, rate in parts) / time)
    return values


def make_look(modal: Modal, ahead: float) -> Callable[[Modes, float, float], tuple[float, float]]:
    """look(y, s, r) -> the plate voltage now, and `ahead` seconds on if nothing nonlinear flowed; ripple
    and mains left out."""
    out = modal.plate
    now, then = out.modes, [c * decay(rate, ahead) for c, rate in zip(out.modes, modal.rate, strict=True)]
    n = range(modal.size)
    rows = ["+".join(f"{q}{k}*y{k}" for k in n) + "+f+r*b" for q in "pq"]
    source = f"def make({','.join([f'p{k},q{k}' for k in n])},a,b,c,d):\n def look(y,s,r):\n  "
    source += (
        ",".join(f"y{k}" for k in n) + f",=y\n  f=s*a+c\n  return {rows[0]},{rows[1]}+r*d\n return look\n"
    )
    scope: dict[str, Callable[..., Callable[[Modes, float, float], tuple[float, float]]]] = {}
    exec(compile(source, f"<look of {modal.size} modes>", "exec"), scope)
    pairs = [value for pair in zip(now, then, strict=True) for value in pair]
    return scope["make"](*pairs, out.s, out.r, out.clamp, out.s * ahead)


def make_step(modal: Modal, period: float, high_window: float, low_window: float, kicked: bool) -> Step:
    """step(y, s, r, rc, rs, mc, ms, j) -> (y a period later, mean of the high node over the first
    `high_window` seconds, of the low node over `low_window`). rc, rs: ripple's cosine and sine parts at
    the start; mc, ms the mains'. Clamp off."""
    driven = modal.net.supply_state < 0 and any(modal.net.from_supply)
    values = [decay(rate, period) for rate in modal.rate]
    if kicked:
        pairs = zip(modal.plate_force, modal.rate, strict=True)
        values += [f * decay_integral(rate, period) for f, rate in pairs]
    values += _mean_coefficients(modal, modal.high, high_window, driven, kicked)
    values += _mean_coefficients(modal, modal.low, low_window, driven, kicked)
    return _maker(modal.size, driven, kicked)(*values)
