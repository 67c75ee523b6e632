"""Play an example exchange (protocol/examples/*.jsonl, described in protocol/README.md) to an emulated box, line by line.

Every line that the box sends is checked, expected or not: its checksum, its schema, that it is compact JSON of at most 512 bytes.
"""

from __future__ import annotations

import json
import zlib
from collections import deque
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from dwellbench import assets
from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.wire import schemas
from dwellbench.wire.core import unseal

Entry = dict[str, Any]
PERIOD_MS = 5
PATIENCE_MS = 40_000  # the longest wait for one line: discharge proven after the start of a box


def files() -> list[Path]:
    """Every example."""
    return sorted((assets.protocol() / "examples").glob("*.jsonl"))


def entries(path: Path) -> list[Entry]:
    """The entries of one file."""
    return [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()]


def scenario(head: Entry) -> Scenario:
    """What the first entry says the box is wired to."""
    return Scenario.parse(head["scenario"], "example").with_seed(head["seed"])


def look_up(message: Any, path: str) -> Any:
    """What stands at a dotted path, such as result.ratings.volts_mv."""
    for name in path.split("."):
        message = message[int(name)] if isinstance(message, list) else message[name]
    return message


class Replay:
    """One box and the exchange with it."""

    def __init__(self, box: EmulatedBox) -> None:
        self.box = box
        self.ms = 0
        self.lines: deque[bytes] = deque()
        self.asked: dict[Any, str] = {}
        self._partial = bytearray()
        self._every: list[tuple[int, bytes]] = []
        self._next_sign = 0
        box.link.attach(True)
        box.tick()

    def play(self, entry: Entry) -> None:
        """Do what one entry says. AssertionError when the box says something else."""
        if "wait_ms" in entry:
            self.wait(entry["wait_ms"])
        elif "nothing_ms" in entry:
            self.nothing(entry["nothing_ms"])
        elif "every_ms" in entry:
            self._every = [(entry["every_ms"], entry[">"].encode() + b"\n")]
        elif ">hex" in entry:
            self.box.link.push(bytes.fromhex(entry[">hex"]))
        elif ">" in entry:
            self.send(entry[">"].encode())
        elif "<" in entry:
            self.expect(entry["<"], entry["compare"])

    def send(self, line: bytes) -> None:
        """Send a line, and remember which answer belongs to which method."""
        try:
            message = json.loads(line)
        except ValueError:
            message = None
        if isinstance(message, dict) and "id" in message and isinstance(message["id"], int | str):
            self.asked[message["id"]] = str(message.get("method"))
        self.box.link.push(line + b"\n")

    # ---- time

    def wait(self, ms: int) -> None:
        """Let so much virtual time go by; lines that come are kept."""
        for _ in range(ms // PERIOD_MS):
            self._tick()

    def _tick(self) -> None:
        for every_ms, line in self._every:
            if self.ms % every_ms == 0:
                self.box.link.push(line)
        self.ms += PERIOD_MS
        self.box.tick()
        *whole, rest = (bytes(self._partial) + self.box.link.pull()).split(b"\n")
        self._partial[:] = rest
        for line in whole:
            self._check(line)
            self.lines.append(line)

    def _check(self, line: bytes) -> None:
        assert len(line) < 512
        message = unseal(line)
        body = json.dumps(message, separators=(",", ":"), ensure_ascii=False).encode()
        assert body == line, "compact, members in their order, the checksum last"
        assert line.endswith(b'"%08x"}' % zlib.crc32(line[:-18]))
        schemas.check(self.schema_of(message), message)

    def schema_of(self, message: Entry) -> str:
        """The name of the schema that a line of the box must meet."""
        if "method" in message:
            return f"event.{message['method']}"
        return "error" if "error" in message else f"result.{self.asked[message['id']]}"

    # ---- what comes

    def expect(self, expected: str, compare: str | list[str]) -> None:
        """Wait for the next line of the same kind; notifications of other kinds are passed over."""
        wanted = json.loads(expected)
        for line in self._coming():
            message = json.loads(line)
            if "method" in message and message["method"] != wanted.get("method"):
                continue
            self._compare(line, message, expected, wanted, compare)
            return
        raise AssertionError(f"nothing of the kind came within {PATIENCE_MS} ms: {expected}")

    def _compare(
        self, line: bytes, message: Entry, expected: str, wanted: Entry, compare: str | list[str]
    ) -> None:
        if compare == "whole":
            assert line.decode() == expected
            return
        for path in compare:
            assert look_up(message, path) == look_up(wanted, path), (path, line.decode())

    def _coming(self) -> Iterator[bytes]:
        until = self.ms + PATIENCE_MS
        while self.ms < until:
            while self.lines:
                yield self.lines.popleft()
            self._tick()

    def nothing(self, ms: int) -> None:
        """No answer comes for so long; notifications may."""
        self.wait(ms)
        while self.lines:
            line = self.lines.popleft()
            assert b'"method":' in line, line.decode()
