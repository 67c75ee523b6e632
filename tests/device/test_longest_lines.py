"""Every answer and event fits a line with each number at its longest and every text at its worst, so that none is dropped."""

from __future__ import annotations

import json
from typing import Any

import pytest
from link_board import LinkBoard

from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.scenario import Scenario
from dwellbox import answers
from dwellbox.codes import E_INTERNAL_ERROR, ENDS, ERRORS, FAULTS, LOCKOUT, STAGES, STATES
from dwellbox.encode import LINE, Line, text
from dwellbox.ring import Ring

LONGEST_ID = '"' * 16
WORST_KEY = "\x01" * 16  # six bytes each on the wire
MS = 2**30 - 1


def longest(names: tuple[str, ...]) -> int:
    return max(range(len(names)), key=lambda code: len(names[code]))


def answer(result: Any) -> int:
    """The length of the line of a result, newline included."""
    line = '{"jsonrpc":"2.0","result":' + text(result) + ',"id":' + text(LONGEST_ID) + ',"crc":"00000000"}\n'
    json.loads(line)
    return len(line.encode())


@pytest.fixture
def box(monkeypatch: pytest.MonkeyPatch) -> Any:
    """A controller with every number that is told at its longest."""
    emulated = InProcessBox(Scenario.load("film"), 1, time_scale=1234.5)
    emulated.tick()
    box = emulated.controller
    box.course.state = LOCKOUT
    box.course.latch.reason = longest(FAULTS)
    box.bench.stage = longest(STAGES)
    box.course.run_key = WORST_KEY
    box.course.run = MS
    box.boot = 999_999
    box.ring.n = MS
    box.front.part_mv = box.front.supply_mv = -1_048_000
    box.wire.dropped = MS
    monkeypatch.setattr(answers, "temperature_mc", lambda code: -100_000)
    monkeypatch.setattr(type(box.course), "run_ms", lambda self: -MS)
    monkeypatch.setattr(type(box.course), "left_ms", lambda self: MS)
    return box


def test_hello_and_status(box: Any) -> None:
    assert answer(answers.hello(box)) <= LINE
    assert answer(answers.status(box)) <= LINE


def test_run_and_samples() -> None:
    assert answer([("run_key", WORST_KEY), ("run", MS), ("estimate_ms", MS)]) <= LINE
    assert answer([("from", MS), ("count", MS), ("next", MS)]) <= LINE


@pytest.mark.parametrize("code", ERRORS)
def test_errors(code: int) -> None:
    data = repr(RuntimeError("\x01" * 100))[:60] if code == E_INTERNAL_ERROR else "\\" * 80
    error = [("code", code), ("message", ERRORS[code]), ("data", data)]
    assert answer(error) <= LINE


EXTRA = [("look_pf", 10**9), ("short_mv", -(10**6)), ("short_na", 10**9), ("residual_mv", 10**6)]
EVENTS = {
    "state": lambda ring: ring.state(-MS, longest(STATES), longest(STAGES), "run " + WORST_KEY),
    "fault": lambda ring: ring.fault(-MS, longest(FAULTS), longest(STATES), -(10**6)),
    "done": lambda ring: ring.done(-MS, MS, WORST_KEY, longest(ENDS), longest(FAULTS), EXTRA),
    "log": lambda ring: ring.log(-MS, "raised " + "\x01" * 60),
}


@pytest.mark.parametrize("put", EVENTS.values(), ids=EVENTS)
def test_events(put: Any) -> None:
    ring = Ring(64)
    ring.n = ring.first = MS
    put(ring)
    line = Line(999_999)
    line.begin_event(ring, MS)
    assert line.busy, "it would be dropped"
    board = LinkBoard(LINE)
    while line.busy:
        line.send(board, 32)
    message = json.loads(bytes(board.sent))
    assert message["params"]["n"] == MS
    assert len(board.sent) <= LINE
