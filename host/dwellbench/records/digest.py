"""Digests over what was written, so that damage shows: SQLite itself keeps no check sums over its pages.

A closed run has one over everything that stands in it for good (identity, part, plan, times, end, events, the hash of its samples
and of its calibration). Outcomes and notes, of which more may come later, have one each. They find damage, not forgery: whoever
can write the file can write a digest.
"""

from __future__ import annotations

import hashlib
import json
import sqlite3
from typing import Any

# In front of every digest: what went into it. One that changes gets a new number, and the old one stays readable.
_FORM = "1:"

_FIXED = (
    *("run_key", "firmware", "build", "simulated", "label", "marking", "part", "role", "grade", "plan"),
    *("started_utc", "ended_utc", "state", "end", "fault", "why", "sample_count"),
)
_RUN = (
    f"SELECT {', '.join(f'run.{name}' for name in _FIXED)}, box.unique_id, box.model, calibration.hash, trace.hash"
    " FROM run LEFT JOIN box ON box.id = run.box LEFT JOIN calibration ON calibration.id = run.calibration"
    " LEFT JOIN trace ON trace.run = run.id WHERE run.id = ?"
)


def digest_of(*values: Any) -> str:
    """Return a digest over values as they stand in the file: text, numbers, None, lists of them."""
    text = json.dumps(values, default=repr, separators=(",", ":"))
    return _FORM + hashlib.sha256(text.encode()).hexdigest()


def run_digest(connection: sqlite3.Connection, run: int) -> str:
    """Return the digest of a run's row and events as they are now."""
    row = connection.execute(_RUN, (run,)).fetchone()
    events = connection.execute(
        "SELECT number, kind, document FROM event WHERE run = ? ORDER BY number", (run,)
    )
    return digest_of(list(row), [list(event) for event in events])


def outcome_digest(run: int, made_utc: str, document: str) -> str:
    """Return the digest of an outcome."""
    return digest_of("outcome", run, made_utc, document)


def note_digest(run: int, made_utc: str, document: str) -> str:
    """Return the digest of a note."""
    return digest_of("note", run, made_utc, document)


def calibration_hash(document: str) -> str:
    """Return the hash that names a version of a calibration: over its contents, not its wrapping."""
    return hashlib.sha256(document.encode()).hexdigest()


def fill_digests(connection: sqlite3.Connection) -> None:
    """Give what was written before there were digests theirs: they vouch from now on."""
    for (run,) in connection.execute("SELECT id FROM run WHERE state != 'open'").fetchall():
        connection.execute("UPDATE run SET digest = ? WHERE id = ?", (run_digest(connection, run), run))
    for table, of in (("outcome", outcome_digest), ("note", note_digest)):
        for row in connection.execute(f"SELECT id, run, made_utc, document FROM {table}").fetchall():
            digest = of(row["run"], row["made_utc"], row["document"])
            connection.execute(f"UPDATE {table} SET digest = ? WHERE id = ?", (digest, row["id"]))
