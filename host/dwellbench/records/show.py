"""One record as a whole, and its samples; both checked against what was written with them."""

from __future__ import annotations

import json
import sqlite3
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dwellbench.errors import StoreError, UsageError
from dwellbench.records.failures import damaged
from dwellbench.records.packing import COLUMNS, hash_of, unpack
from dwellbench.records.query import number_of

_PLAIN = (
    *("run_key", "firmware", "build", "label", "marking", "role", "grade", "started_utc", "ended_utc"),
    *("state", "end", "fault", "why", "verdict", "sample_count", "digest"),
)
_ROW = (
    f"SELECT {', '.join(f'run.{name}' for name in _PLAIN)}, part, plan, simulated, box.unique_id, box.model,"
    " calibration.document AS calibration FROM run JOIN box ON box.id = run.box"
    " LEFT JOIN calibration ON calibration.id = run.calibration WHERE run.id = ?"
)


def show(connection: sqlite3.Connection, name: str | int) -> dict[str, Any]:
    """Return one whole record but its samples. UsageError if there is none of this name; StoreError if it cannot be read."""
    run = number_of(name)
    row = connection.execute(_ROW, (run,)).fetchone()
    if row is None:
        raise _none(run)
    try:
        return _document(connection, run, row)
    except (ValueError, TypeError):  # JSON that is none any more
        raise damaged(f"R{run}", "One of its documents cannot be read.") from None


def _document(connection: sqlite3.Connection, run: int, row: sqlite3.Row) -> dict[str, Any]:
    record: dict[str, Any] = {"record": f"R{run}", **{key: row[key] for key in _PLAIN}}
    record["simulated"] = bool(row["simulated"])
    record["box"], record["model"] = row["unique_id"], row["model"]
    record["part"], record["plan"] = json.loads(row["part"]), json.loads(row["plan"])
    record["calibration"] = None if row["calibration"] is None else json.loads(row["calibration"])
    record["notes"] = [
        {"made_utc": note["made_utc"], "text": note["document"]}
        for note in connection.execute(
            "SELECT made_utc, document FROM note WHERE run = ? ORDER BY id", (run,)
        )
    ]
    record["note"] = record["notes"][0]["text"] if record["notes"] else None
    record["events"] = [
        {"kind": event["kind"], **json.loads(event["document"])}
        for event in connection.execute(
            "SELECT kind, document FROM event WHERE run = ? ORDER BY number", (run,)
        )
    ]
    record["outcomes"] = [
        {"made_utc": outcome["made_utc"], **json.loads(outcome["document"])}
        for outcome in connection.execute(
            "SELECT made_utc, document FROM outcome WHERE run = ? ORDER BY id", (run,)
        )
    ]
    return record


def samples(connection: sqlite3.Connection, name: str | int) -> NDArray[np.int64]:
    """Return a record's sample rows, shape (n, 18); of an open run, those that are in the file. StoreError if they are
    not what was written."""
    run = number_of(name)
    if connection.execute("SELECT 1 FROM run WHERE id = ?", (run,)).fetchone() is None:
        raise _none(run)
    row = connection.execute("SELECT samples, hash FROM trace WHERE run = ?", (run,)).fetchone()
    try:
        if row is None:
            return _batches(connection, run)
        table = unpack(row["samples"])
    except ValueError:
        raise damaged_samples(run) from None
    if hash_of(table) != row["hash"]:
        raise damaged_samples(run)
    return table


def _batches(connection: sqlite3.Connection, run: int) -> NDArray[np.int64]:
    pieces = [np.zeros((0, COLUMNS), dtype=np.int64)]
    query = "SELECT samples FROM sample_batch WHERE run = ? ORDER BY number"
    pieces += [unpack(batch["samples"]) for batch in connection.execute(query, (run,))]
    return np.concatenate(pieces)


def damaged_samples(run: int) -> StoreError:
    """The error for samples that are not what was written."""
    return damaged(f"R{run}", "Its samples are not what was written.")


def _none(run: int) -> UsageError:
    return UsageError(f"There is no record R{run}.", remedy="List them with: dwellbench records list.")
