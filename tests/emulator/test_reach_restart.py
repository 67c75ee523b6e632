"""What a controller's restart leaves and what it takes: flash, scratch, pins, link; the watchdog; the way into the plain interpreter.
In both interpreters."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator

import pytest

from dwellbench.emulator import lockstep
from dwellbench.emulator.emulated_box import FLASH_PERIODS, EmulatedBox
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.world import CAUSE_POWER, CAUSE_RESET
from dwellbench.errors import UsageError
from dwellbench.wire.core import Answer, Client, Event

PART = '[[part]]\nlabel = "A"\ncapacitance_F = 1e-6\n'
PLAN: dict[str, object] = {
    "run_key": "k",
    "volts_mv": 400_000,
    "dwell_ms": 60_000,
    "expect_pf": 1_000_000,
    "nudge": False,
}
WAKE_S = 40  # discharge is proven after a start: the worst-case time on the bleed, and to spare
Make = Callable[..., "Driven"]


class Driven:
    """A box and a host that keeps it alive."""

    def __init__(self, box: EmulatedBox) -> None:
        self.box, self.client = box, Client()
        self.events: list[Event] = []
        self._period = 0
        box.link.attach(True)

    def go(self, seconds: float) -> Driven:
        """Let time pass, with a sign of life every half second."""
        for _ in range(round(seconds * 200)):
            self._period += 1
            if self._period % 100 == 50:
                self.box.link.push(self.client.notify("keepalive"))
            self.box.tick()
            self.events += self.client.receive(self.box.link.pull())
        return self

    def ask(self, method: str, params: dict[str, object] | None = None) -> Event | None:
        """The answer or refusal, None when there is none within a second."""
        data, id_ = self.client.request(method, params)
        self.box.link.push(data)
        self.go(1.0)
        return next((e for e in self.events if getattr(e, "id", None) == id_), None)

    def status(self) -> dict[str, object]:
        """Asked twice if need be: the first answer after a restart joins the half line that the old life left with the host."""
        answer = self.ask("status") or self.ask("status")
        assert isinstance(answer, Answer), answer
        return answer.result


@pytest.fixture(params=[InProcessBox, LockstepBox], ids=["cpython", "micropython"])
def make(request: pytest.FixtureRequest) -> Iterator[Make]:
    """Builds boxes of a scenario's text, in one interpreter or the other."""
    if request.param is LockstepBox:
        try:
            lockstep.interpreter()
        except UsageError:
            if os.environ.get("CI"):
                raise
            pytest.skip("no MicroPython on this computer")
    made: list[EmulatedBox] = []

    def build(text: str) -> Driven:
        made.append(request.param(Scenario.parse(text), 5))
        return Driven(made[-1])

    yield build
    for box in made:
        box.stop()


def fault(kind: str, at_s: float, for_s: float | None = None, run: int = 0) -> str:
    more = "" if for_s is None else f"for_s = {for_s}\n"
    return f'[[fault]]\nkind = "{kind}"\nat_s = {at_s}\nrun = {run}\n{more}'


def test_a_reset_keeps_flash_and_scratch_and_drops_what_was_on_the_link(make: Make) -> None:
    host = make(PART + fault("controller_reset", 30.0))
    host.go(29.9)
    box = host.box
    assert (box.cause, box.resets) == (CAUSE_POWER, 0)
    box.scratch = 0
    box.flash["settings"] = b'{"volts_mv":400000}'
    box.link.push(b'{"half a line')
    host.go(0.1)
    assert (box.cause, box.resets) == (CAUSE_RESET, 1)
    assert not box.link.into and not box.link.waiting
    answer = host.ask("hello")
    assert isinstance(answer, Answer)
    assert (answer.result["boot"], answer.result["ratings"]["volts_mv"]) == (2, 400_000)
    assert host.status()["state"] == "waking"


@pytest.mark.parametrize(("kind", "kept"), [("controller_reset", True), ("power_lost", False)])
def test_scratch_lives_through_a_reset_and_not_through_a_loss_of_power(
    make: Make, kind: str, kept: bool
) -> None:
    """The latched reason is in scratch at once and in flash only when discharge is proven, so here it is in scratch alone."""
    text = PART + fault("stop_pressed", 5.0, 0.05, run=1) + fault(kind, 5.1, 1.0, run=1)
    host = make(text).go(WAKE_S)
    host.ask("hello")
    assert isinstance(host.ask("run", PLAN), Answer)
    while host.box.resets == 0:
        assert host.box.flash.get("latch") in (None, b"\0")
        host.go(0.005)
    assert host.box.cause == (CAUSE_RESET if kept else CAUSE_POWER)
    host.go(WAKE_S)
    assert host.status()["fault"] == ("stop" if kept else "reset_in_run")
    assert not host.box.world.truth.hurt


def test_a_hung_controller_is_reset_after_two_seconds_and_its_outputs_stand_still_meanwhile(
    make: Make,
) -> None:
    host = make(PART + fault("controller_hung", 15.0, run=1)).go(WAKE_S)
    host.ask("hello")
    assert isinstance(host.ask("run", PLAN), Answer)
    box = host.box
    while not box.world.controller_hung:
        host.go(0.005)
    assert box.world.truth.supply_on
    outputs, began_s = box.outputs, box.now_s
    host.go(0.1)
    assert not box.world.truth.supply_on, "not pumped, it has lost its enable"
    assert box.outputs == outputs
    while box.resets == 0:
        host.go(0.005)
    assert 1.9 <= box.now_s - began_s <= 2.2, "the start counts itself in flash"
    assert (box.cause, box.world.controller_hung) == (CAUSE_RESET, False)
    host.go(WAKE_S)
    assert host.status()["fault"] == "reset_in_run"
    assert abs(box.world.truth.part_V) < 30
    assert not box.world.truth.hurt


def test_maintenance_leads_into_the_plain_interpreter_and_no_watchdog_bites_there(make: Make) -> None:
    host = make(PART + "[operator]\nopens_after_s = 0.5\nhandling_s = 50\n").go(WAKE_S)
    host.ask("hello")
    box = host.box
    host.ask("run", {**PLAN, "dwell_ms": 1000})
    while not box.world.truth.lid_open:
        host.go(0.5)
    host.go(1.0)
    answer = host.ask("maintenance")
    assert isinstance(answer, Answer)
    assert answer.result == {"restart": True}
    assert box.plain
    assert (box.outputs, box.supply_mv) == (0, 0)
    assert host.go(10).ask("status") is None
    assert (box.plain, box.resets) == (True, 0)


def test_the_stop_button_held_at_power_up_leads_there_too(make: Make) -> None:
    text = (
        PART
        + fault("stop_pressed", 9.0, 5.0)
        + fault("power_lost", 10.0, 1.0)
        + fault("power_lost", 20.0, 1.0)
    )
    host = make(text).go(11.5)
    assert host.box.plain
    assert host.ask("hello") is None
    host.go(10)
    assert (host.box.plain, host.box.resets) == (False, 2)
    assert isinstance(host.ask("hello"), Answer)


def test_pressed_while_the_controller_is_reset_it_does_not(make: Make) -> None:
    host = make(PART + fault("stop_pressed", 8.0, run=1) + fault("controller_reset", 8.0, run=1)).go(WAKE_S)
    host.ask("hello")
    assert isinstance(host.ask("run", PLAN), Answer)
    while host.box.resets == 0:
        host.go(0.005)
    host.go(WAKE_S)
    assert not host.box.plain
    assert host.status()["state"] == "lockout"
    assert abs(host.box.world.truth.part_V) < 30


def test_a_write_to_flash_holds_the_loop_and_not_the_world(make: Make) -> None:
    host = make(PART)
    box = host.box
    begin = box.world.now_us
    box.tick()  # the start counts itself in flash
    assert box.world.now_us - begin == (FLASH_PERIODS + 1) * 5000
    host.go(WAKE_S)
    assert host.status()["state"] == "rest", "a declared pause is not a loop that was late"


def test_two_boxes_side_by_side_know_nothing_of_each_other(make: Make) -> None:
    one, two = make(PART), make(PART + fault("stop_pressed", 1.0))
    for _ in range(150):
        one.go(0.2)
        two.go(0.2)
    one.ask("hello")
    two.ask("hello")
    assert (one.status()["stop"], two.status()["stop"]) == (False, True)
