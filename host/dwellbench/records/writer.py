"""One run being written: rows as they arrive, events, and the end.

Rows are kept back for at most a second of samples and then written in one transaction, so that a killed program loses no more
than that. Ending a run packs its batches into one piece, with the outcome, in a single transaction: there is no moment at which
samples are neither here nor there.
"""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from dwellbench.records.database import explained, now_utc
from dwellbench.records.owner import BoxLock
from dwellbench.records.packing import hash_of, pack, unpack

BATCH = 10
"""Rows a transaction: one second at ten samples a second."""


class RunWriter:
    """Made by `Store.begin_run`. `id` is the record's number."""

    def __init__(self, connection: sqlite3.Connection, path: Path, run: int, lock: BoxLock) -> None:
        self.id = run
        self._connection = connection
        self._path = path
        self._lock = lock
        self._held: list[list[int]] = []
        self._batches = 0
        self._events = 0
        self.open = True

    def rows(self, rows: Iterable[Sequence[int]]) -> None:
        """Take sample rows; those of a whole second are in the file when this returns."""
        self._held.extend([int(value) for value in row] for row in rows)
        if len(self._held) >= BATCH:
            self.flush()

    def flush(self) -> None:
        """Write what is held back."""
        if not self._held:
            return
        data = pack(self._held)
        with explained(self._path):
            self._connection.execute(
                "INSERT INTO sample_batch VALUES (?, ?, ?)", (self.id, self._batches, data)
            )
        self._batches += 1
        self._held = []

    def event(self, kind: str, document: dict[str, Any]) -> None:
        """Write an event (state, fault, done, log) at once, after the rows before it."""
        self.flush()
        with explained(self._path):
            self._connection.execute(
                "INSERT INTO event VALUES (?, ?, ?, ?)", (self.id, self._events, kind, json.dumps(document))
            )
        self._events += 1

    def end(self, end: str | None, fault: str | None, outcome: dict[str, Any] | None) -> int:
        """End the run with its outcome; return the record's number."""
        self._close("ended", end, fault, None, outcome)
        return self.id

    def interrupted(self, why: str, outcome: dict[str, Any] | None = None) -> int:
        """End the run as interrupted, and say why."""
        self._close("interrupted", None, None, why, outcome)
        return self.id

    def _close(
        self, state: str, end: str | None, fault: str | None, why: str | None, outcome: dict[str, Any] | None
    ) -> None:
        if not self.open:
            return
        self.flush()
        with explained(self._path):
            close_run(self._connection, self.id, state, end, fault, why, outcome)
        self.open = False
        self._lock.release()


def close_run(
    connection: sqlite3.Connection,
    run: int,
    state: str,
    end: str | None,
    fault: str | None,
    why: str | None,
    outcome: dict[str, Any] | None,
) -> None:
    """Pack a run's samples and set its end, in one transaction."""
    connection.execute("BEGIN IMMEDIATE")
    try:
        batches = connection.execute(
            "SELECT samples FROM sample_batch WHERE run = ? ORDER BY number", (run,)
        ).fetchall()
        pieces = [unpack(row["samples"]) for row in batches]
        table = np.concatenate(pieces) if pieces else np.zeros((0, 18), dtype=np.int64)
        verdict = None if outcome is None else outcome.get("verdict")
        connection.execute(
            "UPDATE run SET state = ?, end = ?, fault = ?, why = ?, verdict = ?, ended_utc = ?,"
            " samples = ?, samples_hash = ?, sample_count = ? WHERE id = ?",
            (state, end, fault, why, verdict, now_utc(), pack(table), hash_of(table), len(table), run),
        )
        connection.execute("DELETE FROM sample_batch WHERE run = ?", (run,))
        if outcome is not None:
            connection.execute(
                "INSERT INTO outcome (run, made_utc, document) VALUES (?, ?, ?)",
                (run, now_utc(), json.dumps(outcome)),
            )
        connection.execute("COMMIT")
    except BaseException:
        connection.execute("ROLLBACK")
        raise
