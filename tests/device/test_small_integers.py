"""In the steady state no number leaves the board's 31-bit small integers, beyond which each is an object of the heap.

A desktop MicroPython has 63 bits and cannot show it. Here readings, the clock, the box's numbers and the plan's are watched
through every sum and product of a whole run of the firmware, at its highest voltage and far up the millisecond count.
"""

from __future__ import annotations

import json
from typing import Any

import pytest
import small

from dwellbench import assets
from dwellbench.emulator.in_process import InProcessBox, SimulatedBoard
from dwellbench.emulator.scenario import Scenario
from dwellbench.wire.core import Client, Notice
from dwellbox import plan as plan_module
from dwellbox.codes import DWELL, REST
from dwellbox.controller import Controller


class WatchedBoard(SimulatedBoard):
    """Readings and clock as watched numbers."""

    def __init__(self, box: InProcessBox) -> None:
        super().__init__(box)
        clock = self.now_ms
        self.now_ms = lambda: small.Small(clock())

    def code(self, unit: int) -> int:
        return small.Small(super().code(unit))

    def inputs(self) -> int:
        return small.Small(super().inputs())


class WatchedBox(InProcessBox):
    """The firmware over such a board, with the reference box's numbers watched too."""

    def start(self) -> None:
        text = (assets.device() / "reference_box.json").read_text(encoding="utf-8")
        self.board = WatchedBoard(self)
        self.controller = Controller(self.board, json.loads(text, parse_int=small.Small), assets.build_hash())
        self._step = self.controller.step
        self._wait = self.board.wait_period


@pytest.fixture
def plan_watched(monkeypatch: pytest.MonkeyPatch) -> None:
    begin = plan_module.Plan.__init__

    def init(self: Any, params: dict[str, Any]) -> None:
        begin(self, {name: small.watched(value) for name, value in params.items()})

    monkeypatch.setattr(plan_module.Plan, "__init__", init)


@pytest.mark.usefixtures("plan_watched")
@pytest.mark.parametrize(
    ("volts_mv", "part"),
    [
        (650_000, "capacitance_F = 47e-9\nleakage_ohm = 3e10"),
        (400_000, "capacitance_F = 4e-6\nleakage_ohm = 3e6"),
    ],
    ids=["highest voltage", "a leaky part on the low shunt"],
)
def test_dwell_and_rest_stay_within_31_bits(volts_mv: int, part: str) -> None:
    scenario = Scenario.parse(f'clock_ms = 1073700000\n[[part]]\nlabel = "a"\n{part}\n')
    box = WatchedBox(scenario, 3)
    client = Client()
    box.link.attach(True)
    seen = {DWELL: 0, REST: 0}
    outside: dict[tuple[str, int], int] = {}
    ends: list[str] = []
    plan = {
        "run_key": "k",
        "volts_mv": volts_mv,
        "dwell_ms": 4000,
        "ceiling_ua": 2000,
        "nudge": False,
        "bleed_ms": 0,
    }
    box.tick()
    for period in range(16_000):
        if period == 10:
            box.link.push(client.request("hello")[0])
        if period == 6500:
            box.link.push(client.request("run", plan)[0])
        if period % 100 == 50:
            box.link.push(client.notify("keepalive"))
        small.beyond.clear()
        state = box.controller.course.state
        box.tick()
        if state in seen and state == box.controller.course.state:
            seen[state] += 1
            outside.update(small.beyond)
        ends += [
            e.params["end"]
            for e in client.receive(box.link.pull())
            if isinstance(e, Notice) and e.method == "done"
        ]
        if ends and seen[REST] > 400 and state == REST:
            break
    assert ends == ["complete"]
    assert seen[DWELL] > 700
    assert outside == {}


def test_the_watch_sees_a_product_that_is_too_large() -> None:
    small.beyond.clear()
    assert (small.Small(1 << 20) * 512) // 512 == 1 << 20
    assert small.beyond == {}
    assert (1 << 20) * small.Small(1 << 10) == 1 << 30
    assert list(small.beyond.values()) == [1 << 30]
    assert next(iter(small.beyond))[0] == "test_small_integers.py"
