"""Looking for damage: every page, every digest, every document and every sample."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from dwellbench.errors import StoreError, UsageError
from dwellbench.records.digest import calibration_hash, note_digest, outcome_digest, run_digest
from dwellbench.records.folding import folded
from dwellbench.records.show import samples, show


@dataclass(frozen=True)
class Damage:
    """Something that is not as it was written: in which record (None: the file as such), and a sentence."""

    record: str | None
    what: str


def check(connection: sqlite3.Connection) -> Iterator[Damage]:
    """Yield everything that is wrong, the file's structure first. Reads all of it; changes nothing."""
    yield from _guarded(None, lambda: _structure(connection))
    yield from _guarded(None, lambda: _calibrations(connection))
    runs: list[int] = []
    yield from _guarded(None, lambda: _numbers(connection, runs))
    for run in runs:
        yield from check_record(connection, run)


def check_record(connection: sqlite3.Connection, run: int, *, with_samples: bool = True) -> Iterator[Damage]:
    """Yield what is wrong with one record."""
    for look in (_row, _outcomes, _notes, *([_samples] if with_samples else [])):
        yield from _guarded(f"R{run}", lambda look=look: look(connection, run))  # type: ignore[misc]


def _guarded(record: str | None, look: Callable[[], Iterator[str]]) -> Iterator[Damage]:
    """Damage may show as an error of SQLite's as well: it is one more finding, and the search goes on."""
    try:
        for what in look():
            yield Damage(record, what)
    except (sqlite3.Error, ValueError, TypeError, AttributeError) as error:
        yield Damage(record, f"It cannot be read: {error}.")
    except (StoreError, UsageError) as error:  # UsageError: an index names a record that its table has not
        yield Damage(record, str(error.details.get("what", error.message)))


def _structure(connection: sqlite3.Connection) -> Iterator[str]:
    for row in connection.execute("PRAGMA integrity_check"):
        if row[0] != "ok":
            yield f"The file is damaged: {row[0]}."
    for row in connection.execute("PRAGMA foreign_key_check"):
        yield f"A row of {row[0]} names a row of {row[2]} that is not there."


def _calibrations(connection: sqlite3.Connection) -> Iterator[str]:
    for row in connection.execute("SELECT id, document, hash FROM calibration"):
        if calibration_hash(row["document"]) != row["hash"]:
            yield f"Calibration {row['id']} is not what was read from its box."


def _numbers(connection: sqlite3.Connection, into: list[int]) -> Iterator[str]:
    """The runs, by their table itself and not by an index."""
    into += [row[0] for row in connection.execute("SELECT id FROM run NOT INDEXED ORDER BY id")]
    yield from ()


def _row(connection: sqlite3.Connection, run: int) -> Iterator[str]:
    show(connection, run)
    row = connection.execute(
        "SELECT state, digest, verdict, label, marking, search FROM run WHERE id = ?", (run,)
    ).fetchone()
    if row["state"] != "open" and row["digest"] != run_digest(connection, run):
        yield "What it says of part, plan, times or events is not what was written."
    if row["search"] != folded(row["label"], row["marking"]):
        yield "What a search looks through is not its label and marking."
    newest = connection.execute(
        "SELECT document FROM outcome WHERE run = ? ORDER BY id DESC", (run,)
    ).fetchone()
    if row["verdict"] != (None if newest is None else json.loads(newest[0]).get("verdict")):
        yield "The verdict in lists is not that of its outcome."


def _outcomes(connection: sqlite3.Connection, run: int) -> Iterator[str]:
    rows = connection.execute("SELECT made_utc, document, digest FROM outcome WHERE run = ?", (run,))
    for made_utc, document, digest in rows:
        if digest != outcome_digest(run, made_utc, document):
            yield f"The outcome of {made_utc} is not what was written."


def _notes(connection: sqlite3.Connection, run: int) -> Iterator[str]:
    rows = connection.execute("SELECT made_utc, document, search, digest FROM note WHERE run = ?", (run,))
    for made_utc, document, search, digest in rows:
        if digest != note_digest(run, made_utc, document) or search != folded(document):
            yield f"The note of {made_utc} is not what was written."


def _samples(connection: sqlite3.Connection, run: int) -> Iterator[str]:
    samples(connection, run)
    left = connection.execute(
        "SELECT count(*) FROM sample_batch JOIN run ON run.id = run WHERE run = ? AND state != 'open'", (run,)
    ).fetchone()[0]
    if left:
        yield f"{left} second(s) of samples could not be read when it was closed."
