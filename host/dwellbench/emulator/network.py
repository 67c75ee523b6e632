"""The box's circuit around one part, for one setting of every contact, as matrices.

    supply s --- charge_ohm --- NO (charge relay) NC --- bleed 2 --- ground
                                  |
    ground --- bleed 1 (NC) ---  h  --- divider --- ground
                                  |
                         ESR, the part, its absorption ladder        h: high node, l: low node
                                  |
                                  l --- shunt --- ground;  100 pF;  clamp to +/-5 V

States, in this order: u (across the part's plates; across the empty clips when a lead is open), l (low
node to ground), then when a lead is open the part's own plate voltage, then the ladder's capacitor
voltages, then the supply's output when it is off and joined by the charge relay (on, it is a source).
Chosen so that the capacitance matrix is all but diagonal.

Simplifications: stray capacitance of the high node sits behind the part's series resistance when a part is
connected (picoseconds); buffers draw nothing.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

from dwellbench.emulator import reference
from dwellbench.emulator.modes import Matrix

CHARGE_NONE, CHARGE_MADE, CHARGE_REST = 0, 1, 2
"""The charge relay's changeover contact: travelling, on the charge path, on the second bleed."""
CLAMP_OFF, CLAMP_HIGH, CLAMP_LOW = 0, 1, -1
_INSULATION_OHM = 1e16  # of the best part; keeps every mode's rate above nought


@dataclass(frozen=True)
class Values:
    """True values of one box and the part in it; ohms, farads, siemens, volts."""

    charge_ohm: float
    bleed_ohm: tuple[float, float]
    divider_ohm: float
    supply_divider_ohm: float
    shunts_ohm: tuple[float, float, float]
    fixture_ohm: float
    capacitance_F: float
    esr_ohm: float
    leakage_ohm: float
    ladder: tuple[tuple[float, float], ...]  # (ohm, farad) of each series branch


class Switches(NamedTuple):
    """Everything that makes one linear network. Hashable: networks are cached by it."""

    charge: int = CHARGE_REST
    bleed: bool = True  # first bleed in circuit
    shunt: int = 0  # 0, 1, 2 = 560 ohm, 100 kohm, 1 Mohm
    supply_on: bool = False
    clamp: int = CLAMP_OFF
    connected: bool = True  # both leads of the part
    extra_S: float = (
        0.0  # linear conductance beside the part's own leakage: short, late leak, tangent of a nonlinear one
    )
    charge_open: bool = False  # faults: a broken charge resistor, second bleed, divider
    bleed2_open: bool = False
    divider_open: bool = False
    fixture_S: float = 0.0  # dirt across the clips


class Row(NamedTuple):
    """A voltage as a linear form of states and of the supply as a source."""

    states: dict[int, float]
    supply: float = 0.0


@dataclass
class Network:
    """C dx/dt = -G x + b_supply s + b_clamp; `high` and `low` are the rows of the two nodes."""

    size: int
    capacitance: Matrix
    conductance: Matrix
    from_supply: list[float]
    from_clamp: list[float]
    high: Row
    low: Row
    plate: int  # index of the part's plate voltage
    supply_state: int  # index of the supply's voltage, or -1


class _Builder:
    def __init__(self, size: int) -> None:
        self.c = [[0.0] * size for _ in range(size)]
        self.g = [[0.0] * size for _ in range(size)]
        self.b_supply = [0.0] * size
        self.b_clamp = [0.0] * size

    def capacitor(self, farad: float, across: dict[int, float]) -> None:
        for i, a in across.items():
            for j, b in across.items():
                self.c[i][j] += farad * a * b

    def resistor(
        self, siemens: float, across: dict[int, float], supply: float = 0.0, clamp_V: float = 0.0
    ) -> None:
        """Between a linear form of the states and `supply` times the supply's source plus `clamp_V`."""
        for i, a in across.items():
            for j, b in across.items():
                self.g[i][j] += siemens * a * b
            self.b_supply[i] += siemens * a * supply
            self.b_clamp[i] += siemens * a * clamp_V


def _to_ground(v: Values, k: Switches) -> float:
    """Conductance of everything from the high node to ground."""
    siemens = 0.0 if k.divider_open else 1.0 / v.divider_ohm
    if k.bleed:
        siemens += 1.0 / v.bleed_ohm[0]
    if k.charge == CHARGE_REST and not k.bleed2_open:
        siemens += 1.0 / v.bleed_ohm[1]
    return siemens


def _paths(b: _Builder, v: Values, k: Switches, node: dict[int, float], lead_S: float, supply: int) -> Row:
    """Join ground and supply to `node` through a lead of `lead_S` (0: the node itself), and give the high
    node's row.

    The lead, the paths to ground and to the supply form a star at the high node, which has no capacitance
    of its own: star to mesh, every term positive, so nothing cancels.
    """
    ground = _to_ground(v, k)
    made = k.charge == CHARGE_MADE and not k.charge_open
    charge = 1.0 / v.charge_ohm if made else 0.0
    source = 1.0 if supply < 0 else 0.0
    other = {} if supply < 0 else {supply: -1.0}
    if not lead_S:
        b.resistor(ground, node)
        b.resistor(charge, {**node, **other}, supply=source)
        return Row(node)
    star = lead_S + ground + charge
    b.resistor(lead_S * ground / star, node)
    b.resistor(lead_S * charge / star, {**node, **other}, supply=source)
    if supply >= 0:
        b.resistor(ground * charge / star, {supply: 1.0})
    row = {i: a * lead_S / star for i, a in node.items()}
    if supply >= 0:
        row[supply] = charge / star
    return Row(row, charge / star * source)


def build(v: Values, k: Switches) -> Network:
    """The network of `v` with its contacts as in `k`."""
    made = k.charge == CHARGE_MADE and not k.charge_open
    floating = made and not k.supply_on
    plate = 0 if k.connected else 2
    first = plate + 1 if plate else 2  # of the ladder
    size = first + len(v.ladder) + (1 if floating else 0)
    supply = size - 1 if floating else -1
    b = _Builder(size)
    _part(b, v, k, plate, first)
    node = {0: 1.0, 1: 1.0}
    b.capacitor(reference.STRAY_F, node)
    b.capacitor(reference.FIXTURE_F, {0: 1.0})
    b.capacitor(reference.LOW_F, {1: 1.0})
    b.resistor(1.0 / v.fixture_ohm + k.fixture_S, {0: 1.0})
    b.resistor(1.0 / v.shunts_ohm[k.shunt], {1: 1.0})
    if k.clamp:
        b.resistor(1.0 / reference.CLAMP_OHM, {1: 1.0}, clamp_V=k.clamp * reference.box().clamp_V)
    if floating:
        b.capacitor(reference.box().supply_F, {supply: 1.0})
        b.resistor(off_bleed_S(v), {supply: 1.0})
    lead_S = 1.0 / max(v.esr_ohm, reference.LEAST_ESR_OHM) if k.connected else 0.0
    high = _paths(b, v, k, node, lead_S, supply)
    return Network(size, b.c, b.g, b.b_supply, b.b_clamp, high, Row({1: 1.0}), plate, supply)


def _part(b: _Builder, v: Values, k: Switches, plate: int, first: int) -> None:
    b.capacitor(v.capacitance_F, {plate: 1.0})
    b.resistor(1.0 / v.leakage_ohm + 1.0 / _INSULATION_OHM + k.extra_S, {plate: 1.0})
    for i, (ohm, farad) in enumerate(v.ladder, first):
        b.capacitor(farad, {i: 1.0})
        b.resistor(1.0 / ohm, {plate: 1.0, i: -1.0})


def off_bleed_S(v: Values) -> float:
    """What discharges the supply's own output when it is off: bleeder and divider."""
    return 1.0 / reference.box().off_bleeder_ohm + 1.0 / v.supply_divider_ohm
