"""What may be added to a run: outcomes (a later judgement stands beside the first) and notes. Nothing here changes what is there."""

from __future__ import annotations

import sqlite3
from typing import Any

from dwellbench.records.digest import note_digest, outcome_digest
from dwellbench.records.documents import dumped
from dwellbench.records.folding import folded


def add_outcome(connection: sqlite3.Connection, run: int, outcome: dict[str, Any], made_utc: str) -> None:
    """Keep an outcome; the newest one's verdict is what lists show. Inside the caller's transaction."""
    document = dumped(outcome)
    connection.execute(
        "INSERT INTO outcome (run, made_utc, document, digest) VALUES (?, ?, ?, ?)",
        (run, made_utc, document, outcome_digest(run, made_utc, document)),
    )
    connection.execute("UPDATE run SET verdict = ? WHERE id = ?", (outcome.get("verdict"), run))


def add_note(connection: sqlite3.Connection, run: int, text: str, made_utc: str) -> None:
    """Keep a note. Inside the caller's transaction."""
    connection.execute(
        "INSERT INTO note (run, made_utc, document, search, digest) VALUES (?, ?, ?, ?, ?)",
        (run, made_utc, text, folded(text), note_digest(run, made_utc, text)),
    )
