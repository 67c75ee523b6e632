"""What stands in the file before a run begins: the box, the calibration it works with, and the run's own row."""

from __future__ import annotations

import json
import sqlite3
from dataclasses import dataclass
from typing import Any

from dwellbench.records.digest import calibration_hash
from dwellbench.records.documents import dumped
from dwellbench.records.folding import folded
from dwellbench.records.owner import this_process


@dataclass(frozen=True)
class Begun:
    """All that is known of a run when it is about to begin. `box` has box (its id), model, firmware and build."""

    run_key: str
    part: dict[str, Any]
    role: str | None
    grade: str
    plan: dict[str, Any]
    box: dict[str, Any]
    calibration: dict[str, Any] | None
    simulated: bool
    label: str | None
    started_utc: str


def keep_box(connection: sqlite3.Connection, box: dict[str, Any], seen_utc: str) -> int:
    """Return the row of a box, made if it was never seen."""
    connection.execute(
        "INSERT INTO box (unique_id, model, first_seen_utc) VALUES (?, ?, ?) ON CONFLICT (unique_id) DO NOTHING",
        (box["box"], box["model"], seen_utc),
    )
    row = connection.execute("SELECT id FROM box WHERE unique_id = ?", (box["box"],)).fetchone()
    return int(row[0])


def keep_calibration(
    connection: sqlite3.Connection, box: int, calibration: dict[str, Any] | None, seen_utc: str
) -> int | None:
    """Return the row of a calibration. Every version that was ever seen is kept, once, by the hash of its contents."""
    if calibration is None:
        return None
    document = json.dumps(calibration, sort_keys=True)
    key = (box, calibration_hash(document))
    connection.execute(
        "INSERT INTO calibration (box, hash, document, first_seen_utc) VALUES (?, ?, ?, ?)"
        " ON CONFLICT (box, hash) DO NOTHING",
        (*key, document, seen_utc),
    )
    row = connection.execute("SELECT id FROM calibration WHERE box = ? AND hash = ?", key).fetchone()
    return int(row[0])


def insert_run(connection: sqlite3.Connection, begun: Begun, seen_utc: str) -> int:
    """Return the number of a new, open run."""
    box = keep_box(connection, begun.box, seen_utc)
    marking = begun.part["marking"]
    row = {
        "run_key": begun.run_key,
        "box": box,
        "calibration": keep_calibration(connection, box, begun.calibration, seen_utc),
        "firmware": begun.box["firmware"],
        "build": begun.box["build"],
        "simulated": int(begun.simulated),
        "label": begun.label,
        "marking": marking,
        "part": dumped(begun.part),
        "role": begun.role,
        "grade": begun.grade,
        "plan": dumped(begun.plan),
        "started_utc": begun.started_utc,
        "state": "open",
        "owner": this_process(),
        "search": folded(begun.label, marking),
    }
    sql = f"INSERT INTO run ({', '.join(row)}) VALUES ({', '.join('?' * len(row))})"
    return int(connection.execute(sql, tuple(row.values())).lastrowid or 0)
