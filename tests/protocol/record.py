"""Write the box's lines of every example anew, after a change of the firmware that is meant to show on the wire.

    python -m tests.protocol.record

What is compared stays as it was; read the difference before you commit it.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parent))

import replay

from dwellbench.emulator.in_process import InProcessBox


class Recorder(replay.Replay):
    """Plays, and takes what comes instead of comparing it."""

    came = ""

    def _compare(self, line: bytes, *rest: Any) -> None:
        self.came = line.decode()


def record(path: Path) -> None:
    """Record one file."""
    head, *rest = replay.entries(path)
    player = Recorder(InProcessBox(replay.scenario(head)))
    for entry in rest:
        player.play(entry)
        if "<" in entry:
            entry["<"] = player.came
    lines = [json.dumps(entry, ensure_ascii=False) + "\n" for entry in (head, *rest)]
    path.write_text("".join(lines), encoding="utf-8")


if __name__ == "__main__":
    for each in replay.files():
        record(each)
