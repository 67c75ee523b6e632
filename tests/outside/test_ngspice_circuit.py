"""The emulator's circuit against another simulator: ngspice, on a netlist written here from the reference
box's own file.

Source of the other answer: ngspice (any release; transient analysis, Gear), run on the spot. Skipped where
it is not installed.
"""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
from dataclasses import dataclass
from pathlib import Path

import pytest

from dwellbench.emulator.circuit import Circuit
from dwellbench.emulator.circuit_state import PERIOD_S, Plates
from dwellbench.emulator.network import CHARGE_MADE, Switches, Values
from dwellbench.emulator.part_spec import Superlinear
from dwellbench.emulator.parts import PowerLaw

NGSPICE = shutil.which("ngspice")
pytestmark = pytest.mark.skipif(
    NGSPICE is None and not os.environ.get("CI"), reason="ngspice is not installed"
)

BOX = json.loads((Path(__file__).parents[2] / "device" / "reference_box.json").read_text("utf-8"))
PATHS = BOX["paths"]
CHARGING = Switches(charge=CHARGE_MADE, bleed=False, supply_on=True)


@dataclass(frozen=True)
class Case:
    """A part, the voltage, and a course: (seconds it lasts, contacts)."""

    farad: float
    ohm: float
    esr: float
    ladder: tuple[tuple[float, float], ...]  # time constant s, share
    volts: float
    course: tuple[tuple[float, Switches], ...]
    power: Superlinear | None = None


CASES = {
    "film on the megohm": Case(
        47e-9, 3e10, 0.5, ((0.1, 8e-4), (1.0, 8e-4), (10.0, 8e-4)), 600.0,
        ((1.0, CHARGING), (4.0, CHARGING._replace(shunt=2)), (0.2, Switches())),
    ),
    "leaky paper, large, bled": Case(
        1e-6, 2e7, 2.0, ((0.2, 0.01), (2.0, 0.01)), 400.0,
        ((5.0, CHARGING), (8.0, CHARGING._replace(shunt=1)), (0.03, Switches()),
         (0.5, Switches(bleed=False, charge=0))),
    ),
    "superlinear": Case(
        100e-9, 1e11, 0.5, (), 550.0, ((1.5, CHARGING), (3.0, CHARGING._replace(shunt=1))),
        Superlinear(300.0, 2.7e7, 6.0),
    ),
    "steep": Case(
        10e-9, 1e11, 0.5, (), 600.0, ((0.5, CHARGING), (1.0, CHARGING._replace(shunt=0))),
        Superlinear(200.0, 1e7, 15.0),
    ),
}  # fmt: skip


def values(case: Case) -> Values:
    divider = PATHS["divider_top_ohm"] + PATHS["divider_bottom_ohm"]
    ladder = tuple((tau / (share * case.farad), share * case.farad) for tau, share in case.ladder)
    bleeds = (float(PATHS["bleed_ohm"][0]), float(PATHS["bleed_ohm"][1]))
    shunts = tuple(float(ohm) for ohm in PATHS["shunts_ohm"])
    return Values(
        PATHS["charge_ohm"], bleeds, divider, divider, shunts, 1e12, case.farad, case.esr, case.ohm, ladder
    )


def gate(name: str, closed: list[tuple[float, bool]]) -> str:
    """A control voltage, 1 while the contact is closed; microseconds between."""
    points, last = [], None
    for at, on in closed:
        if last is not None:
            points += [f"{at:.9g} {last}"]
        last = int(on)
        points += [f"{at + 1e-6:.9g} {last}"]
    return f"V{name} {name} 0 PWL({' '.join(points)})"


def netlist(case: Case, looks: list[float]) -> str:
    """The drawing of network.py as a netlist, the part and the course of `case`, node volts at the times
    `looks`."""
    starts, at = [], 0.0
    for seconds, contacts in case.course:
        starts.append((at, contacts))
        at += seconds
    shunt, rail = PATHS["shunts_ohm"], PATHS["clamp_mv"] / 1e3
    lines = [
        "dwellbench reference box",
        f"Vs s 0 PWL(0 0 {case.volts / 1e4:.9g} {case.volts})",
        f"Rc s a {PATHS['charge_ohm']}",
        "Sc a h gc 0 contact",
        f"Rb1 h b1 {PATHS['bleed_ohm'][0]}",
        "Sb1 b1 0 gb 0 contact",
        f"Rb2 h b2 {PATHS['bleed_ohm'][1]}",
        "Sb2 b2 0 gr 0 contact",
        f"Rdt h d {PATHS['divider_top_ohm']}",
        f"Rdb d 0 {PATHS['divider_bottom_ohm']}",
        f"Resr h p {case.esr}",
        f"Cp p l {case.farad}",
        f"Rl p l {case.ohm}",
        "Rf p l 1e12",
        "Cf p l 2p",
        "Cw p 0 10p",
        "Cl l 0 100p",
        *[f"R6{k} l m{k} {ohm}\nS6{k} m{k} 0 g6{k} 0 contact" for k, ohm in enumerate(shunt)],
        f"Bclamp l 0 I=(V(l)>{rail})*(V(l)-{rail})/10+(V(l)<-{rail})*(V(l)+{rail})/10",
        *[
            f"Ra{k} p a{k} {tau / (share * case.farad)}\nCa{k} a{k} l {share * case.farad}"
            for k, (tau, share) in enumerate(case.ladder)
        ],
        gate("gc", [(t, c.charge == 1) for t, c in starts]),
        gate("gb", [(t, c.bleed) for t, c in starts]),
        gate("gr", [(t, c.charge == 2) for t, c in starts]),
        *[gate(f"g6{k}", [(t, c.shunt == k) for t, c in starts]) for k in range(3)],
        ".model contact sw vt=0.5 vh=0 ron=1m roff=1e16",
        ".options gmin=1e-20 reltol=1e-6 trtol=1 abstol=1e-15 vntol=1e-9 chgtol=1e-18 method=gear",
        f".tran 1m {at:.9g} 0 1m uic",
    ]
    if case.power:
        p = case.power
        lines.append(f"Bp p l I=pwr(V(p,l)/{p.at_V},{p.exponent})*{p.at_V / p.ohm_there}")
    for i, t in enumerate(looks):
        lines += [f".meas tran h{i} find v(h) at={t:.9g}", f".meas tran l{i} find v(l) at={t:.9g}"]
    return "\n".join([*lines, ".end", ""])


def by_ngspice(case: Case, looks: list[float], folder: Path) -> list[tuple[float, float]]:
    assert NGSPICE is not None
    path = folder / "box.cir"
    path.write_text(netlist(case, looks), "utf-8")
    got = subprocess.run([NGSPICE, "-b", str(path)], capture_output=True, text=True, timeout=120, check=False)
    found = {
        m[1]: float(m[2]) for m in re.finditer(r"^([hl]\d+)\s*=\s*([-+.\deE]+)", got.stdout, re.MULTILINE)
    }
    assert len(found) == 2 * len(looks), got.stdout[-2000:] + got.stderr[-2000:]
    return [(found[f"h{i}"], found[f"l{i}"]) for i in range(len(looks))]


def by_circuit(case: Case, looks: list[float]) -> list[tuple[float, float]]:
    c = Circuit(values(case), 314.0, (4e-3, 4e-3), 0j, 0j)
    c.fit(values(case), PowerLaw(case.power) if case.power else None, Plates(0.0, [0.0] * len(case.ladder)))
    found, t = [], 0.0
    rise = round(case.volts / 1e4 / PERIOD_S)
    for seconds, contacts in case.course:
        c.switch(contacts)
        for _ in range(round(seconds / PERIOD_S)):
            c.set_slope(1e4 if rise > 0 and contacts.supply_on else 0.0)
            rise -= 1
            c.period()
            t += PERIOD_S
            if any(abs(t - look) < 1e-6 for look in looks):
                across, low, _ = c.states()
                found.append((across + low, low))
    return found


def settled_times(case: Case) -> list[float]:
    """Late in every part of the course, when what the switching did is over."""
    times, at = [], 0.0
    for seconds, _ in case.course:
        at += seconds
        times += [at - round(0.3 * seconds / PERIOD_S) * PERIOD_S, at - 2 * PERIOD_S] if seconds > 0.1 else []
    return times


@pytest.mark.parametrize("name", CASES)
def test_node_volts_and_shunt_currents_agree_within_a_fifth_of_a_per_cent(name, tmp_path):
    case = CASES[name]
    looks = settled_times(case)
    ours, theirs = by_circuit(case, looks), by_ngspice(case, looks, tmp_path)
    assert len(ours) == len(looks)
    for (high, low), (other_high, other_low), t in zip(ours, theirs, looks, strict=True):
        assert high == pytest.approx(other_high, rel=2e-3, abs=1e-4), t
        assert low == pytest.approx(other_low, rel=2e-3, abs=2e-6), t
