"""Every example exchange, played to the firmware in CPython and under MicroPython; and every example line against its schema."""

from __future__ import annotations

import json
import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import replay
from jsonschema import Draft7Validator

from dwellbench import assets
from dwellbench.emulator import lockstep
from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.errors import UsageError
from dwellbench.wire import schemas
from dwellbench.wire.core import unseal

FILES = replay.files()
NAMES = [path.stem for path in FILES]
METHODS = sorted(
    path.stem.partition(".")[2] for path in (assets.protocol() / "schemas").glob("request.*.json")
)


def micropython() -> type[EmulatedBox]:
    """The box under MicroPython. Where continuous integration runs, its absence is a failure."""
    try:
        lockstep.interpreter()
    except UsageError:
        if os.environ.get("CI"):
            pytest.fail("MicroPython is part of what continuous integration runs, and is not here")
        pytest.skip("no MicroPython on this computer")
    return LockstepBox


@pytest.mark.parametrize("interpreter", ["cpython", "micropython"])
@pytest.mark.parametrize("path", FILES, ids=NAMES)
def test_the_firmware_answers_as_the_example_says(path: Path, interpreter: str) -> None:
    head, *rest = replay.entries(path)
    kind = micropython() if interpreter == "micropython" else InProcessBox
    box = kind(replay.scenario(head))
    try:
        player = replay.Replay(box)
        for number, entry in enumerate(rest, 2):
            try:
                player.play(entry)
            except AssertionError as error:
                raise AssertionError(f"{path.name}, line {number}: {error}") from error
    finally:
        box.stop()


KEYS = {
    frozenset({"about", "scenario", "seed"}),
    frozenset({">"}),
    frozenset({">", "wrong"}),
    frozenset({">", "every_ms"}),
    frozenset({">hex"}),
    frozenset({"<", "compare"}),
    frozenset({"wait_ms"}),
    frozenset({"nothing_ms"}),
}


@pytest.mark.parametrize("path", FILES, ids=NAMES)
def test_entries_are_of_the_kinds_described(path: Path) -> None:
    head, *rest = replay.entries(path)
    assert set(head) == {"about", "scenario", "seed"}
    for entry in rest:
        assert frozenset(entry) in KEYS - {frozenset(head)}
        if "<" in entry:
            assert entry["compare"] == "whole" or entry["compare"], "something must be compared"
            for place in [] if entry["compare"] == "whole" else entry["compare"]:
                replay.look_up(json.loads(entry["<"]), place)


def lines(direction: str) -> Iterator[tuple[str, dict[str, Any]]]:
    for path in FILES:
        for number, entry in enumerate(replay.entries(path), 1):
            if direction in entry:
                yield f"{path.name}, line {number}", entry


def strict(name: str) -> Draft7Validator:
    return Draft7Validator(
        json.loads((assets.protocol() / "schemas" / f"{name}.json").read_text(encoding="utf-8"))
    )


def reason(line: str) -> str | None:
    """Why a line to the box is not what the wire allows, None when it is."""
    data = line.encode().rstrip(b"\r")
    try:
        message = json.loads(data)
        if b'"crc"' in data:
            unseal(data)
        schemas.check(f"request.{message['method']}", message)
    except (ValueError, KeyError, TypeError) as error:
        return str(error) or type(error).__name__
    if not strict(f"request.{message['method']}").is_valid(message):
        return "draft 7"
    twice: list[str] = []
    json.loads(data, object_pairs_hook=lambda pairs: twice.extend(name for name, _ in pairs) or dict(pairs))
    return "a member twice" if len(twice) != len(set(twice)) else None


def test_lines_to_the_box_are_valid_unless_they_are_said_to_be_wrong() -> None:
    for where, entry in lines(">"):
        assert (reason(entry[">"]) is not None) == ("wrong" in entry), (where, reason(entry[">"]))


def test_lines_of_the_box_are_valid_to_both_libraries() -> None:
    asked: dict[Any, str] = {}
    for path in FILES:
        for entry in replay.entries(path):
            if ">" in entry and reason(entry[">"]) is None:
                message = json.loads(entry[">"])
                asked[message.get("id")] = message["method"]
            if "<" not in entry:
                continue
            message = unseal(entry["<"].encode())
            name = f"event.{message['method']}" if "method" in message else "error"
            name = f"result.{asked[message['id']]}" if "result" in message else name
            schemas.check(name, message)
            assert strict(name).is_valid(message)


def test_every_method_event_and_kind_of_end_is_shown() -> None:
    sent = {json.loads(entry[">"])["method"] for _, entry in lines(">") if "wrong" not in entry}
    assert sent == set(METHODS)
    came = {json.loads(entry["<"]).get("method") for _, entry in lines("<")}
    assert came >= {"state", "samples", "fault", "done"}
    ends = {json.loads(entry["<"])["params"].get("end") for _, entry in lines("<") if '"done"' in entry["<"]}
    assert ends >= {"complete", "finished", "aborted", "link_lost", "fault"}
