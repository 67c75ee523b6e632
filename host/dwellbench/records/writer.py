"""One run being written: rows as they arrive, events, and the end.

Rows are kept back for at most a second of samples and then written in one transaction, so that a killed program loses no more
than that. While another program keeps the file to itself, what comes is held here for a while instead of waiting: a host that
waits says nothing to the box, and two seconds of silence would end the run.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

from dwellbench.errors import StoreError
from dwellbench.records.closing import Closing, close_run
from dwellbench.records.database import now_utc, waiting
from dwellbench.records.documents import dumped
from dwellbench.records.failures import explained
from dwellbench.records.owner import BoxLock
from dwellbench.records.packing import pack
from dwellbench.records.transaction import transaction

BATCH_MS = 1000
BATCH_ROWS = 10
"""A transaction's worth: one second, or ten rows of 100 ms each."""

SHORT_WAIT_S = 0.1
MOST_REFUSALS = 40
"""In mid-run: how long to wait for another writer, and how often in a row before it is an error (some 40 s of samples, 0.5 MB)."""

_BATCH = "INSERT INTO sample_batch VALUES (?, ?, ?)"
_EVENT = "INSERT INTO event VALUES (?, ?, ?, ?)"


class RunWriter:
    """Made by `Store.begin_run`. `id` is the record's number. Every method may raise StoreError."""

    def __init__(
        self, connection: sqlite3.Connection, path: Path, run: int, lock: BoxLock, wait_s: float
    ) -> None:
        self.id = run
        self.open = True
        self._connection = connection
        self._path = path
        self._lock = lock
        self._wait_s = wait_s
        self._rows: list[list[int]] = []
        self._pending: list[tuple[str, tuple[Any, ...]]] = []
        self._batches = self._events = self._refusals = 0
        self._taken_ms = 0  # time of the last row that was made part of a batch

    def rows(self, rows: Iterable[Sequence[int]]) -> None:
        """Take sample rows of 18 whole numbers; those of a whole second are in the file when this returns."""
        for row in rows:
            self._rows.append([int(value) for value in row])
            if len(self._rows) >= BATCH_ROWS or abs(self._rows[-1][1] - self._taken_ms) >= BATCH_MS:
                self._take_rows()
                self._write_soon()

    def event(self, kind: str, document: dict[str, Any]) -> None:
        """Write an event (state, fault, done, log) at once, after the rows before it."""
        self._take_rows()
        self._pending.append((_EVENT, (self.id, self._events, kind, dumped(document))))
        self._events += 1
        self._write_soon()

    def flush(self) -> None:
        """Write what is held back, waiting for another program as long as for anything."""
        self._take_rows()
        with explained(self._path):
            self._write()

    def end(self, end: str | None, fault: str | None, outcome: dict[str, Any] | None) -> int:
        """End the run with its outcome; return the record's number."""
        return self._close(Closing("ended", end, fault, None, outcome))

    def interrupted(self, why: str, outcome: dict[str, Any] | None = None) -> int:
        """End the run as interrupted, and say why; return the record's number."""
        return self._close(Closing("interrupted", None, None, why, outcome))

    def let_go(self) -> None:
        """Let the box go without an end: the run is closed as interrupted by whoever opens the records next."""
        self._lock.release()

    def _take_rows(self) -> None:
        if self._rows:
            self._pending.append((_BATCH, (self.id, self._batches, pack(self._rows))))
            self._batches += 1
            self._taken_ms = self._rows[-1][1]
            self._rows = []

    def _write_soon(self) -> None:
        """Write, or hold on to it while another program has the file."""
        try:
            with explained(self._path), waiting(self._connection, SHORT_WAIT_S, self._wait_s):
                self._write()
        except StoreError as error:
            self._refusals += 1
            if error.details.get("cause") != "locked" or self._refusals >= MOST_REFUSALS:
                raise

    def _write(self) -> None:
        if not self._pending:
            return
        with transaction(self._connection):
            for sql, values in self._pending:
                self._connection.execute(sql, values)
        self._pending = []
        self._refusals = 0

    def _close(self, closing: Closing) -> int:
        """A second call does nothing: who stops a run and who closes the store may both want its end."""
        if self.open:
            self.flush()
            with explained(self._path):
                close_run(self._connection, self.id, closing, now_utc())
            self.open = False
            self._lock.release()
        return self.id
