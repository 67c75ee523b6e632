"""Shared by tests of the whole chain: scenarios made on the spot, boxes on them, and the truth behind."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from dwellbench.bench import Bench, open_box
from dwellbench.part import Part
from dwellbench.plan import Plan

FILM = (
    "capacitance_F = 47e-9\nleakage_ohm = 3e11\nabsorption = [[0.1, 0.0008], [1.0, 0.0008], [10.0, 0.0008]]\n"
)
FILM_1U = (
    "capacitance_F = 1e-6\nleakage_ohm = 1e10\nabsorption = [[0.1, 0.0008], [1.0, 0.0008], [10.0, 0.0008]]\n"
)
SHORT = "short_ohm = 220.0\n"
OPEN = "open_lead = true\n"


def scenario(folder: Path, *parts: str, extra: str = "") -> str:
    """Write a scenario of parts (bodies of [[part]]) and return its emu:// URL without a query."""
    text = (
        "\n".join(f'[[part]]\nlabel = "P{number}"\n{body}' for number, body in enumerate(parts, 1))
        + "\n"
        + extra
    )
    path = folder / f"scenario{len(list(folder.iterdir()))}.toml"
    path.write_text(text, encoding="utf-8")
    return f"emu://{path}"


def fault(kind: str, at_s: float, **more: Any) -> str:
    """A [[fault]] table."""
    lines = [f'[[fault]]\nkind = "{kind}"\nat_s = {at_s}']
    lines += [f"{name} = {value}" for name, value in more.items()]
    return "\n".join(lines) + "\n"


def ready(url: str) -> Bench:
    """Connect and wait for rest."""
    box = open_box(url)
    box.settle()
    return box


def truth(box: Bench) -> Any:
    """What is really so, which only tests may see."""
    return world(box).truth


def world(box: Bench) -> Any:
    """The emulated world behind an emu:// link."""
    return box._link._port.box.world


def plan(
    box: Bench, marking: str = "47n 630V film", *, volts: float | None = 400.0, dwell: float = 5.0
) -> Plan:
    """A short plan."""
    return Plan.make(Part.parse(marking), None, box.ratings, volts=volts, dwell=dwell)
