"""Whatever stands in a trace file, it is refused as one or judged: no exception, no warning, no number that is not one."""

from __future__ import annotations

import json
import random
from pathlib import Path
from typing import Any

import fastjsonschema
import pytest

import dwellbench.outcome
from dwellbench.errors import TraceError
from dwellbench.judge import judge
from dwellbench.limits.place import Place
from dwellbench.measure.csv_read import parse_csv
from dwellbench.part import Part

SCHEMA = Path(dwellbench.outcome.__file__).parent / "outcome.schema.json"
HEAD = "t_s,stage,shunt_ohm,v_part_V,i_shunt_A,v_supply_V,clipped\n"
PARTS = (
    Part("?"),
    Part("f", capacitance_F=47e-9, rated_V=400.0, rated_kind="dc", dielectric="film"),
    Part("e", capacitance_F=22e-6, rated_V=450.0, rated_kind="dc", dielectric="electrolytic", polar=True),
    Part("c", capacitance_F=1e-9, rated_V=100.0, rated_kind="dc", dielectric="ceramic_2"),
    Part("p", capacitance_F=1e-7, rated_V=600.0, rated_kind="ac", dielectric="paper"),
    Part("t", capacitance_F=1e-6, dielectric="tantalum"),
)
ROLES = ("any", "coupling", "supply_filter", "buffer", "across_the_line", "avc@100V/2M", "coupling@1V/1k")


def some(chance: random.Random, scale: float) -> float:
    return chance.choice((0.0, 1e-30, -scale, scale, scale * chance.random(), chance.gauss(0.0, scale)))


def nonsense(chance: random.Random) -> str:
    """A file of the right form, from wild numbers to something like a charging."""
    rows, at, stage, shunt, volts = [], 0.0, "charge", 560.0, 0.0
    wild, odd_times, size = (
        chance.random() < 0.5,
        chance.random() < 0.3,
        chance.choice((2, 3, 4, 5, 8, 12, 30, 80)),
    )
    for k in range(size):
        at += chance.choice((0.1, 0.03, 2.0, 1e-6)) if odd_times else 0.1
        if chance.random() < 0.1:
            stage = chance.choice(("charge", "dwell", "discharge", "recovery", "look", "zero", "else"))
        if chance.random() < 0.08:
            shunt = chance.choice((560.0, 1e3, 1e5, 1e6))
        if wild:
            cells = (some(chance, 400.0), some(chance, 0.56 / shunt), some(chance, 400.0))
        else:
            volts += (400.0 - volts) * 0.2
            cells = (volts, (400.0 - volts) / 4e5 + chance.gauss(0.0, 1e-9), 400.0)
            stage = "dwell" if k > size / 3 and stage == "charge" else stage
        numbers = ",".join(repr(cell) for cell in cells)
        rows.append(f"{at:.7f},{stage},{shunt:g},{numbers},{chance.choice((0, 0, 0, 0, 0.1))}")
    return HEAD + "\n".join(rows) + "\n"


@pytest.mark.parametrize("seed", range(8))
def test_any_trace(seed: int) -> None:
    validate: Any = fastjsonschema.compile(json.loads(SCHEMA.read_text("utf-8")), use_default=False)
    chance = random.Random(seed)
    judged = 0
    for _ in range(100):
        try:
            trace = parse_csv(nonsense(chance))
        except TraceError:
            continue
        outcome = judge(
            trace,
            chance.choice(PARTS),
            Place.parse(chance.choice(ROLES)),
            grade=chance.choice(("new", "period", "aged")),
        )
        validate(json.loads(json.dumps(outcome.as_json(), allow_nan=False)))
        assert outcome.verdict != "undecided" or outcome.to_decide
        judged += 1
    assert judged > 50
