"""The store: runs are begun, written, ended and found here.

with Store("bench.db") as store:
    writer = store.begin_run(...)
    writer.rows(rows); writer.event("state", {...}); writer.end("complete", None, outcome)
"""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dwellbench.records import query
from dwellbench.records.database import explained, now_utc, open_database
from dwellbench.records.owner import BoxLock, this_process
from dwellbench.records.query import Summary
from dwellbench.records.writer import RunWriter, close_run

INTERRUPTED = "the program that wrote it was ended before the run was"


class Store:
    """A records file. Made if it is not there. Raises StoreError with what to do."""

    def __init__(self, path: str | Path) -> None:
        self.path = Path(path)
        self._connection = open_database(self.path)

    def __enter__(self) -> Store:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file."""
        self._connection.close()

    # -- writing

    def begin_run(
        self,
        *,
        run_key: str,
        part: dict[str, Any],
        role: str | None,
        grade: str,
        plan: dict[str, Any],
        box: dict[str, Any],
        calibration: dict[str, Any] | None,
        simulated: bool,
        label: str | None = None,
        note: str | None = None,
        started_utc: str | None = None,
    ) -> RunWriter:
        """Begin a record before the box is asked to run. `box` has box, model, firmware, build.

        StoreError when another process drives the same box through this store.
        """
        lock = BoxLock(self.path, box["box"])
        lock.take()
        self._close_left_open(box["box"])
        with explained(self.path):
            self._connection.execute("BEGIN IMMEDIATE")
            try:
                box_id = self._box(box)
                calibration_id = self._calibration(box_id, calibration)
                cursor = self._connection.execute(
                    "INSERT INTO run (run_key, box, calibration, firmware, build, simulated, label, note, marking, part, role, grade,"
                    " plan, started_utc, state, owner) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, 'open', ?)",
                    (
                        run_key,
                        box_id,
                        calibration_id,
                        box["firmware"],
                        box["build"],
                        int(simulated),
                        label,
                        note,
                        part["marking"],
                        json.dumps(part),
                        role,
                        grade,
                        json.dumps(plan),
                        started_utc or now_utc(),
                        this_process(),
                    ),
                )
                self._connection.execute("COMMIT")
            except BaseException:
                self._connection.execute("ROLLBACK")
                lock.release()
                raise
        return RunWriter(self._connection, self.path, int(cursor.lastrowid or 0), lock)

    def keep_calibration(self, box: dict[str, Any], calibration: dict[str, Any]) -> None:
        """Keep a calibration that no run has used yet. `box` has box and model."""
        with explained(self.path):
            self._connection.execute("BEGIN IMMEDIATE")
            try:
                self._calibration(self._box(box), calibration)
                self._connection.execute("COMMIT")
            except BaseException:
                self._connection.execute("ROLLBACK")
                raise

    def _box(self, box: dict[str, Any]) -> int:
        self._connection.execute(
            "INSERT INTO box (unique_id, model, first_seen_utc) VALUES (?, ?, ?) ON CONFLICT (unique_id) DO NOTHING",
            (box["box"], box["model"], now_utc()),
        )
        return int(
            self._connection.execute("SELECT id FROM box WHERE unique_id = ?", (box["box"],)).fetchone()[0]
        )

    def _calibration(self, box_id: int, calibration: dict[str, Any] | None) -> int | None:
        """Keep every version that was ever seen, by the hash of its contents."""
        if calibration is None:
            return None
        document = json.dumps(calibration, sort_keys=True)
        digest = hashlib.sha256(document.encode()).hexdigest()
        self._connection.execute(
            "INSERT INTO calibration (box, hash, document, first_seen_utc) VALUES (?, ?, ?, ?) ON CONFLICT (box, hash) DO NOTHING",
            (box_id, digest, document, now_utc()),
        )
        row = self._connection.execute(
            "SELECT id FROM calibration WHERE box = ? AND hash = ?", (box_id, digest)
        ).fetchone()
        return int(row[0])

    # -- runs that a killed process left open

    def unfinished(self) -> list[Summary]:
        """Close the runs that nobody is writing any more, as interrupted, and return them. Live ones are left alone."""
        with explained(self.path):
            rows = self._connection.execute(
                "SELECT DISTINCT box.unique_id FROM run JOIN box ON box.id = run.box WHERE state = 'open'"
            ).fetchall()
        closed: list[Summary] = []
        for row in rows:
            lock = BoxLock(self.path, row["unique_id"])
            if lock.try_take():
                try:
                    closed += self._close_left_open(row["unique_id"])
                finally:
                    lock.release()
        return closed

    def _close_left_open(self, box: str) -> list[Summary]:
        """With the box's lock held, whatever is open for it was left behind."""
        with explained(self.path):
            rows = self._connection.execute(
                "SELECT run.id FROM run JOIN box ON box.id = run.box WHERE state = 'open' AND box.unique_id = ?",
                (box,),
            ).fetchall()
            for row in rows:
                close_run(self._connection, row["id"], "interrupted", None, None, INTERRUPTED, None)
            found = [query.find(self._connection, {}, -1, 0)] if rows else []
        numbers = {row["id"] for row in rows}
        return [summary for summaries in found for summary in summaries if summary.id in numbers]

    # -- reading

    def records(self, limit: int = 50, offset: int = 0, **where: Any) -> list[Summary]:
        """Summaries, newest first; narrow with text, verdict, label, since, until (UTC), box, simulated."""
        with explained(self.path):
            return query.find(self._connection, where, limit, offset)

    def count(self, **where: Any) -> int:
        """How many records match."""
        with explained(self.path):
            return query.count(self._connection, where)

    def record(self, name: str | int) -> dict[str, Any]:
        """One whole record but its samples."""
        with explained(self.path):
            return query.show(self._connection, name)

    def samples(self, name: str | int) -> NDArray[np.int64]:
        """A record's sample rows, shape (n, 18), checked against the hash that was written with them."""
        with explained(self.path):
            return query.samples(self._connection, name)

    def calibrations(self, box: str) -> list[dict[str, Any]]:
        """Every calibration of a box that was ever seen, oldest first."""
        with explained(self.path):
            rows = self._connection.execute(
                "SELECT document, calibration.first_seen_utc FROM calibration JOIN box ON box.id = calibration.box"
                " WHERE unique_id = ? ORDER BY calibration.id",
                (box,),
            ).fetchall()
        return [{"first_seen_utc": row["first_seen_utc"], **json.loads(row["document"])} for row in rows]
