"""Every single fault of the emulated bench, at three moments of a run, through the real firmware: nobody is hurt, and it is told.

What holds in every case, by the truth that no host sees:
* nobody could have touched something charged;
* the lid is never unlocked over a charged part, unless the lock itself is what has failed;
* in the end the part is discharged, or the lid is locked over it;
* the run ends with one of the ends and faults that its row allows.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import pytest

from dwellbench.emulator.faults import KINDS
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.wire.core import Client
from dwellbox.codes import ENDS, FAULTS
from dwellbox.ring import DONE

PART = """
[operator]
handling_s = 8.0
[[part]]
label = "A"
capacitance_F = 1e-6
leakage_ohm = 1e10
absorption = [[0.5, 0.002]]
"""
PLAN: dict[str, Any] = {"run_key": "k", "volts_mv": 400_000, "dwell_ms": 3000, "expect_pf": 1_000_000}
PLAN |= {"low_pct": 50, "high_pct": 50, "bleed_ms": 1000, "ceiling_ua": 500}
AWAKE = 6600  # periods until discharge is proven after power-up
AFTER_S = 37.0  # from the run's start: its 19 s, and the longest proof that follows a fault
SAFE_V = 30.0
OK = "complete"


@dataclass(frozen=True)
class Row:
    """A fault, and what the run may end in when it comes while looking, while holding, just after discharge began."""

    kind: str
    look: set[str]
    hold: set[str]
    discharge: set[str] = field(default_factory=lambda: {OK})
    more: dict[str, Any] = field(default_factory=dict)
    spared: frozenset[str] = frozenset()  # "lock", "charge": what the fault itself takes away

    @property
    def name(self) -> str:
        """For the test's id."""
        return " ".join([self.kind, *(f"{key}={value}" for key, value in self.more.items())])


def row(kind: str, look: str, hold: str, discharge: str = OK, spared: str = "", **more: Any) -> Row:
    """A row; alternatives parted by a bar."""
    ends = [set(words.split("|")) for words in (look, hold, discharge)]
    return Row(kind, *ends, more, frozenset(spared.split()))


RESET = "restarted"
STUCK = "converter_stuck"
ROWS = [
    row("lid_open", "lid_open", "lid_open", "lid_open"),
    row("stop_pressed", "stop", "stop", "stop"),
    row("lid_switch_stuck", "lid_open", "lid_open", "lid_open", which="a", level="open"),
    row("lid_switch_stuck", "lid_open", "lid_open", "lid_open", which="b", level="open"),
    row("lid_switch_stuck", OK, OK, which="a", level="closed"),  # nothing to be seen until the lid opens
    row("lock_fails", OK, OK, position="stays"),
    row("lock_fails", "lock", "lock", "lock", spared="lock", position="open"),
    row("charge_relay_welded", "second_bleed", OK),  # the other bleed does it; the next run finds it
    row("charge_relay_dead", "divider|no_rise", "divider|charge_left"),
    row("charge_path_open", "divider|no_rise", "divider|charge_left"),
    row("bleed_open", OK, OK),  # likewise
    row("bleed_open", "second_bleed", OK, which=2),
    row("bleed_welded", "divider", OK),
    row("bleed_relay_stuck", OK, OK),
    row("shunt_relay_stuck", "over_current|divider", "divider|over_current", which="low", position="work"),
    row("shunt_relay_stuck", "shunt", "shunt", which="low", position="rest"),
    row("shunt_relay_stuck", "shunt", "shunt", which="mid", position="work"),
    row("fixture_dirty", f"{OK}|value_off", OK, ohm=1e8),
    row("divider_open", "divider", "detector|divider"),
    row("divider_open", "over_voltage", "over_voltage", "detector", leg="bottom"),
    row("divider_open", "supply", "supply", which="supply"),
    row("divider_open", "supply_over", "supply_over", which="supply", leg="bottom"),
    row("divider_off", "divider", "divider", factor=0.5),
    row("divider_off", "divider", "divider", factor=0.9),
    row("divider_off", "divider|over_voltage", "over_voltage|divider", factor=1.2),
    row("divider_off", "supply", "supply", which="supply", factor=0.5),
    row("detector_stuck", "detector", "detector", level=0),
    row("detector_stuck", "detector", "detector", "detector", level=1),
    row("converter_silent", "converter_silent", "converter_silent", "converter_silent", unit=0),
    row("converter_silent", "converter_silent", "converter_silent", "converter_silent", unit=1),
    row("converter_stuck", f"{STUCK}|supply|divider", f"{STUCK}|detector|divider", STUCK, unit=0, code=0),
    row("converter_stuck", f"{STUCK}|over_voltage", f"{STUCK}|over_voltage", f"{STUCK}|detector", unit=0, code=32767),
    row("converter_stuck", f"{STUCK}|divider", STUCK, STUCK, unit=1, code=0),
    row("converter_stuck", f"{STUCK}|over_current", f"{STUCK}|over_current", STUCK, unit=1, code=32767),
    row("reference_off", STUCK, STUCK, STUCK, unit=0, fraction=-0.5),
    row("reference_off", STUCK, STUCK, STUCK, unit=1, fraction=-0.5),
    row("thermistor_open", "thermistor", "thermistor"),
    row("thermistor_shorted", "thermistor", "thermistor"),
    row("over_temperature", "over_temperature", "over_temperature", over_s=1.0),
    row("supply_overvoltage", "supply_over", "supply_over", by_V=60.0),
    row("supply_overvoltage", "supply", "supply", by_V=-60.0),
    row("supply_stuck_on", "supply_over", "supply|supply_over", "supply_on", volts=200.0),
    row("supply_stuck_on", "supply_over", "supply_over", "supply_on", volts=650.0),
    row("supply_dead", "supply", "supply"),
    row("supply_drift", "supply_over", "supply_over", V_per_s=20.0),
    row("supply_drift", "supply", "supply", V_per_s=-20.0),
    row("enable_stuck", OK, OK),  # a supply told 0 V gives 0 V
    row("part_shorts", "short", "over_current"),
    row("part_leaks", f"{OK}|value_off", "over_current", ohm=2e5),
    row("part_opens", "charge_left|open", "charge_left", f"{OK}|charge_left|bleed_slow"),
    row("controller_hung", RESET, RESET, RESET),
    row("controller_reset", RESET, RESET, RESET),
    row("power_lost", RESET, RESET, RESET, for_s=2.0),
    row("link_silent", "link_lost", "link_lost"),
    row("clock_jump", "clock", "clock", "clock", by_ms=60_000),
    row("clock_jump", "clock", "clock", "clock", by_ms=100),
    row("clock_jump", "clock", "clock", "clock", by_ms=-60_000),
    row("clock_jump", "clock", "clock", "clock", by_ms=-10),
    row("clock_wrap", OK, OK),
]  # fmt: skip
MOMENTS = {"look": 4.0, "hold": 8.5, "discharge": 16.45}


def test_every_kind_has_a_row() -> None:
    assert {row.kind for row in ROWS} == set(KINDS)


class Watched:
    """A box in its run, its truth looked at every 20 ms."""

    def __init__(self, text: str) -> None:
        self.box = InProcessBox(Scenario.parse(PART + text), 5)
        self.client = Client()
        self.unlocked_V = 0.0
        self.box.link.attach(True)

    def run(self) -> None:
        """From power-up through the run and what follows it."""
        self.box.link.push(self.client.request("hello")[0])
        self._go(AWAKE)
        self.box.link.push(self.client.request("run", PLAN)[0])
        self._go(round(AFTER_S * 200))

    def _go(self, periods: int) -> None:
        for period in range(periods):
            if period % 100 == 50:
                self.box.link.push(self.client.notify("keepalive"))
            self.box.tick()
            self.box.link.pull()
            if period % 4 == 0:
                self._look()

    def _look(self) -> None:
        world = self.box.world
        if not world.lid.bolt and not world.lid.is_open:
            across, low, plates = world.circuit.states()
            self.unlocked_V = max(self.unlocked_V, abs(plates.plate_V), abs(across + low))

    @property
    def end(self) -> str:
        """The fault that ended the run, or its end, or that the controller was restarted in it: as the box's ring has it."""
        if self.box.resets:
            return RESET
        ring = self.box.controller.ring
        notes = [ring.note(n) for n in range(ring.first, ring.n) if ring.kind(n) == DONE]
        assert len(notes) == 1
        _, (_, _, end, fault, _) = notes[0]
        return str(FAULTS[fault] if fault else ENDS[end])


@pytest.mark.parametrize("moment", MOMENTS)
@pytest.mark.parametrize("row", ROWS, ids=lambda row: row.name)
def test_nobody_is_hurt_and_it_is_told(row: Row, moment: str) -> None:
    keys = {"kind": row.kind, "at_s": MOMENTS[moment], **row.more}
    if row.kind == "clock_wrap":
        keys |= {"run": 0, "at_s": AWAKE / 200 + MOMENTS[moment]}
    lines = [
        f'{key} = "{value}"' if isinstance(value, str) else f"{key} = {value}" for key, value in keys.items()
    ]
    watched = Watched("[[fault]]\n" + "\n".join(lines))
    watched.run()
    truth = watched.box.world.truth
    assert not truth.harms
    assert watched.unlocked_V < SAFE_V or "lock" in row.spared
    assert abs(truth.part_V) < SAFE_V or truth.bolt_closed
    assert abs(truth.node_V) < SAFE_V
    assert watched.end in getattr(row, moment)
