"""Ordinary contents of a store, for its tests and benchmarks."""

from __future__ import annotations

import sqlite3
from pathlib import Path
from typing import Any

from dwellbench.records import RunWriter, Store

BOX, OTHER_BOX = "0" * 16, "1" * 16
OUTCOME = {"verdict": "fit", "reason": "because", "findings": []}
DATA = Path(__file__).with_name("data")


def rows(count: int, run: int = 0) -> list[list[int]]:
    """Sample rows as a box makes them: one every 100 ms."""
    return [
        [
            n,
            (n + 1) * 100,
            6,
            1,
            0,
            18,
            163_000 + n % 7,
            9000,
            9100,
            20,
            run - n % 11,
            -10,
            10,
            0,
            8000,
            16000,
            0,
            0,
        ]
        for n in range(count)
    ]


ROWS = rows(57)
OLD_ROWS = [
    [n, n * 100, 6, 1, 0, 18, 163_000 + n, 9000, 9100, 20, -50 + n, -10, 10, 0, 8000, 16000, 0, 0]
    for n in range(57)
]
"""What R1 of the file of version 1 holds."""


def begin(store: Store, box: str = BOX, **changes: Any) -> RunWriter:
    """Begin a run with ordinary contents."""
    contents: dict[str, Any] = {
        "run_key": "key",
        "part": {"marking": "47n 630V film"},
        "role": "coupling",
        "grade": "new",
        "plan": {"volts_V": 630.0},
        "box": {"box": box, "model": "reference", "firmware": "0.1.0", "build": "00000000"},
        "calibration": {"id": "abc"},
        "simulated": True,
    }
    return store.begin_run(**{**contents, **changes})


def whole(store: Store, box: str = BOX, **changes: Any) -> int:
    """A run from beginning to end; return its number."""
    writer = begin(store, box, **changes)
    writer.rows(ROWS[:30])
    writer.event("state", {"n": 30, "boot": 1, "t": 3000, "state": "dwell", "stage": "dwell", "why": ""})
    writer.rows(ROWS[30:])
    return writer.end("complete", None, OUTCOME)


def version_1(path: Path) -> None:
    """Make a file of version 1."""
    raw = sqlite3.connect(path)
    raw.executescript((DATA / "version_1.sql").read_text(encoding="utf-8"))
    raw.close()
