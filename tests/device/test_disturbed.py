"""Whatever arrives on the link, the box does the same with the part, in the same periods.

Two boxes of one seed do one run; the second is fed rubbish all the while. Their outputs must agree in every period, and their
rows in every number; and no period's work, counted by the board's cost model, may outgrow a period.
"""

from __future__ import annotations

import json
import random
from typing import Any

import pytest
from tests.bench.board_cost import Count
from tests.bench.wire_step import _NATIVE, _counted
from wire_vectors import asked, sealed

from dwellbench import assets
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.scenario import Scenario
from dwellbox import wire as wire_module

KEEPALIVE = sealed('{"jsonrpc":"2.0","method":"keepalive"') + b"\n"
PLAN = '{"run_key":"k","volts_mv":250000,"dwell_ms":1500,"expect_pf":47000,"bleed_ms":0,"nudge":false}'
RUN_AT, PERIODS = 6400, 8600
CATCH_UP = 2500  # periods without rubbish at the end: what was held up for it is sent then
DRIVERS_US = 700  # converters over I2C, outputs: beside the firmware's own work

RUBBISH: dict[str, list[bytes]] = {
    "bytes": [bytes(random.Random(seed).randrange(256) for _ in range(60)) + b"\n" for seed in range(40)],
    "half lines": [asked("status")[:length] + b"\n" for length in range(1, 60, 3)],
    "a line of 10 kB": [b"x" * 500] * 20 + [b"\n"],
    "wrong checksums": [
        asked("abort")[:-3] + b'0"}\n',
        asked("finish").replace(b"finish", b"Finish") + b"\n",
    ],
    "wrong types": [
        asked("run", '{"run_key":5}') + b"\n",
        asked("samples", "[]") + b"\n",
        b"[]\n",
        b"null\n",
        b"1e5\n",
    ],
    "unknown methods": [asked("stop") + b"\n", asked("abort.now") + b"\n"],
    "deep": [b'{"a":[{"b":[{"c":[' * 20 + b"\n"],
    "escapes": [b'{"\\ud83d\\ude00' * 12 + b"\n"],
}


class Watched(InProcessBox):
    """Remembers what it drove in every period, and how many bytes of the link it took."""

    def start(self) -> None:
        super().start()
        self.driven: list[tuple[int, int]] = []
        self.most_taken = 0
        self.taken = 0
        get = self.link.get

        def counted() -> int:
            byte = get()
            self.taken += byte >= 0
            return byte

        self.board.get = counted

    def step(self) -> None:
        self.taken = 0
        super().step()
        self.most_taken = max(self.most_taken, self.taken)
        self.driven.append((self.outputs, self.supply_mv))


def run(rubbish: list[bytes]) -> tuple[Watched, list[dict[str, Any]]]:
    """One run; a piece of rubbish every 25 periods (in all at most half of what the box can take)."""
    box = Watched(Scenario.load("film"), 11)
    box.link.attach(True)
    out = bytearray()
    pieces = [rubbish[k % len(rubbish)] for k in range(PERIODS)] if rubbish else []
    owed = 0.0
    for period in range(PERIODS + CATCH_UP):
        if period == 50:
            box.link.push(asked("hello") + b"\n")
        if period == RUN_AT:
            box.link.push(b"\n" + asked("run", PLAN) + b"\n")
        elif period > RUN_AT and period % 60 == 0:
            box.link.push(b"\n" + KEEPALIVE)
        elif RUN_AT + 80 < period < PERIODS and pieces and len(box.link.into) < 40 and owed <= 0:
            piece = pieces.pop()
            box.link.push(piece)
            owed = len(piece)
        owed -= 2.5
        box.tick()
        out += box.link.pull()
    return box, [json.loads(line) for line in out.splitlines()[:-1]]


def rows(lines: list[dict[str, Any]]) -> list[list[int]]:
    return [row for line in lines if line.get("method") == "samples" for row in line["params"]["rows"]]


@pytest.fixture(scope="module")
def quiet() -> tuple[Watched, list[dict[str, Any]]]:
    return run([])


def test_the_undisturbed_run_is_whole(quiet: tuple[Watched, list[dict[str, Any]]]) -> None:
    _, lines = quiet
    assert [line["params"]["end"] for line in lines if line.get("method") == "done"] == ["complete"]
    assert len(rows(lines)) > 60


@pytest.mark.parametrize("kind", RUBBISH)
def test_rubbish_changes_nothing_that_is_driven(
    quiet: tuple[Watched, list[dict[str, Any]]], kind: str
) -> None:
    box, lines = run(RUBBISH[kind])
    assert box.driven == quiet[0].driven
    assert box.most_taken <= wire_module._IN
    assert rows(lines) == rows(quiet[1])
    errors = [line["error"]["code"] for line in lines if "error" in line]
    assert errors, "and it is answered"
    known = {row["code"] for row in json.loads((assets.protocol() / "codes.json").read_text())["errors"]}
    assert set(errors) <= known - {-32603}


def test_no_period_is_missed_while_rubbish_comes() -> None:
    """The whole firmware's step, counted by the board's cost model, stays within a period while holding."""
    box = InProcessBox(Scenario.load("film"), 11)
    box.link.attach(True)
    for period in range(RUN_AT + 1300):
        line = KEEPALIVE if period % 60 == 0 else b""
        line += asked("hello") + b"\n" if period == 50 else b""
        line += asked("run", PLAN.replace("1500", "60000")) + b"\n" if period == RUN_AT else b""
        box.link.push(line)
        box.tick()
        box.link.pull()
    count = Count(lambda code: _counted(code), _NATIVE)
    pieces = [piece for kind in RUBBISH.values() for piece in kind[:6]]
    worst = 0.0
    for period in range(700):
        if len(box.link.into) < 20 and pieces:
            box.link.push(pieces.pop(0))
        if period % 80 == 0:
            box.link.push(b"\n" + KEEPALIVE)
        worst = max(worst, count.of(box.controller.step))
        box.board.wait_period()
        box.link.pull()
    assert box.controller.course.powered(), "it was holding all the while"
    assert worst + DRIVERS_US < 5000
