"""The store: runs are begun, written, ended and found here.

with Store("bench.db") as store:
    writer = store.begin_run(...)
    writer.rows(rows); writer.event("state", {...}); writer.end("complete", None, outcome)
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dwellbench.errors import StoreError
from dwellbench.records import adding, query, show
from dwellbench.records.beginning import Begun, insert_run, keep_box, keep_calibration
from dwellbench.records.check import Damage, check, check_record
from dwellbench.records.closing import Closing, close_run
from dwellbench.records.copying import copy_database
from dwellbench.records.database import WAIT_S, now_utc, open_database, same_version
from dwellbench.records.failures import damaged, explained
from dwellbench.records.folding import storable
from dwellbench.records.owner import BoxLock
from dwellbench.records.query import Summary, Where, number_of
from dwellbench.records.transaction import snapshot, transaction
from dwellbench.records.writer import RunWriter

INTERRUPTED = "the program that wrote it was ended before the run was"
CLOSED = "the records were closed before the run ended"


class Store:
    """A records file. Made if it is not there. Raises StoreError with what to do.

    `wait_s` bounds how long it waits for another program's writing. `writable` is False for a file that may only be read. One
    thread uses it.
    """

    def __init__(self, path: str | Path, *, wait_s: float = WAIT_S) -> None:
        self.path = Path(path)
        self._wait_s = wait_s
        self._connection, self.writable = open_database(self.path, wait_s)
        self._writers: list[RunWriter] = []

    def __enter__(self) -> Store:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        try:
            self.close()
        except StoreError:
            if (
                error is None
            ):  # what went wrong first is what the user must hear of; the run is closed at the next start
                raise

    def close(self) -> None:
        """Close the file. A run that is still being written is closed as interrupted."""
        try:
            for writer in self._writers:
                writer.interrupted(CLOSED)
        finally:
            for writer in self._writers:
                writer.let_go()
            self._writers = []
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

        StoreError when another process drives the same box through this store, UsageError for a label or note that is no text.
        """
        storable("label", label)
        storable("note", note)
        now = now_utc()
        begun = Begun(
            run_key, part, role, grade, plan, box, calibration, simulated, label, started_utc or now
        )
        self._must_write()
        lock = BoxLock(self.path, box["box"])
        lock.take()
        try:
            self._close_left_open(box["box"])
            with self._writing(durable=True):
                run = insert_run(self._connection, begun, now)
                if note:
                    adding.add_note(self._connection, run, note, now)
        except BaseException:
            lock.release()
            raise
        return self._writer(run, lock)

    def keep_calibration(self, box: dict[str, Any], calibration: dict[str, Any]) -> None:
        """Keep a calibration that no run has used yet. `box` has box and model."""
        now = now_utc()
        with self._writing(durable=True):
            keep_calibration(self._connection, keep_box(self._connection, box, now), calibration, now)

    def add_outcome(self, name: str | int, outcome: dict[str, Any]) -> None:
        """Put a later outcome beside what a record has; lists show the newest one's verdict."""
        with self._writing(durable=True):
            adding.add_outcome(self._connection, self._closed(name), outcome, now_utc())

    def add_note(self, name: str | int, text: str) -> None:
        """Put a note beside those a record has."""
        storable("note", text)
        with self._writing(durable=True):
            adding.add_note(self._connection, self._closed(name), text, now_utc())

    def _writer(self, run: int, lock: BoxLock) -> RunWriter:
        writer = RunWriter(self._connection, self.path, run, lock, self._wait_s)
        self._writers = [other for other in self._writers if other.open] + [writer]
        return writer

    @contextmanager
    def _writing(self, *, durable: bool) -> Iterator[None]:
        self._must_write()
        with explained(self.path), transaction(self._connection, durable=durable):
            same_version(self.path, self._connection)
            yield

    def _must_write(self) -> None:
        if not self.writable:
            raise StoreError(
                f"{self.path} can be read but not written.",
                remedy="Give yourself the right to write there, or name another file with --records.",
                cause="read_only",
            )

    def _closed(self, name: str | int) -> int:
        """The number of a record that is not being written."""
        run = number_of(name)
        if show.show(self._connection, run)["state"] == "open":
            raise StoreError(f"R{run} is still being written.", remedy="Wait for its end.", cause="open")
        return run

    # -- runs that a killed process left open

    def unfinished(self) -> list[Summary]:
        """Close the runs that nobody is writing any more, as interrupted, and return them. Live ones are left alone."""
        if not self.writable:
            return []
        with explained(self.path):
            boxes = {one.box for one in query.find(self._connection, Where(state="open"), -1, 0)}
        closed: list[Summary] = []
        for box in sorted(boxes):
            lock = BoxLock(self.path, box)
            if lock.try_take():
                try:
                    closed += self._close_left_open(box)
                finally:
                    lock.release()
        return closed

    def _close_left_open(self, box: str) -> list[Summary]:
        """With the box's lock held, whatever is open for it was left behind."""
        closed: list[Summary] = []
        with explained(self.path):
            for left in query.find(self._connection, Where(state="open", box=box), -1, 0):
                close_run(self._connection, left.id, Closing("interrupted", why=INTERRUPTED), now_utc())
                closed.append(query.summary(self._connection, left.id))
        return closed

    # -- reading

    def records(self, limit: int = 50, offset: int = 0, **where: Any) -> list[Summary]:
        """Summaries, newest first, a page of them.

        Narrowed by the fields of `Where`: text, verdict, label, marking, since, until, box, simulated, state.
        """
        with explained(self.path):
            return query.find(self._connection, Where(**where), limit, offset)

    def count(self, **where: Any) -> int:
        """How many records match."""
        with explained(self.path):
            return query.count(self._connection, Where(**where))

    def last_test(self, *, label: str | None = None, marking: str | None = None) -> Summary | None:
        """The newest record that came to its end, of a label, a marking, or both."""
        found = self.records(1, 0, label=label, marking=marking, state="ended")
        return found[0] if found else None

    def record(self, name: str | int, *, even_damaged: bool = False) -> dict[str, Any]:
        """One whole record but its samples. StoreError if it is not what was written.

        With `even_damaged` what can be read comes all the same, and `damage` in it has a sentence for each thing that is wrong.
        """
        with explained(self.path), snapshot(self._connection):
            document = show.show(self._connection, name)
            damage = [one.what for one in check_record(self._connection, number_of(name), with_samples=False)]
        if damage and not even_damaged:
            raise damaged(document["record"], damage[0])
        return {**document, "damage": damage} if even_damaged else document

    def samples(self, name: str | int) -> NDArray[np.int64]:
        """A record's sample rows, shape (n, 18), checked against the hash that was written with them."""
        with explained(self.path), snapshot(self._connection):
            return show.samples(self._connection, name)

    def calibrations(self, box: str) -> list[dict[str, Any]]:
        """Every calibration of a box that was ever seen, oldest first."""
        with explained(self.path):
            rows = self._connection.execute(
                "SELECT document, calibration.first_seen_utc FROM calibration JOIN box ON box.id = calibration.box"
                " WHERE unique_id = ? ORDER BY calibration.id",
                (box,),
            ).fetchall()
        return [{"first_seen_utc": row["first_seen_utc"], **json.loads(row["document"])} for row in rows]

    # -- the file as such

    def check(self) -> list[Damage]:
        """Everything in the file that is not as it was written; empty when it is sound. Reads all of it."""
        with explained(self.path), snapshot(self._connection):
            return list(check(self._connection))

    def backup(self, target: str | Path) -> None:
        """Copy everything to a new file, whole or not at all, while others may go on writing."""
        copy_database(self.path, Path(target))
