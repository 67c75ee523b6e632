"""Finding and showing records. A record's number is shown as R17; both R17 and 17 name it."""

from __future__ import annotations

import json
import re
import sqlite3
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dwellbench.errors import StoreError, UsageError
from dwellbench.records.packing import hash_of, unpack


@dataclass(frozen=True)
class Summary:
    """One line of a list."""

    id: int
    label: str | None
    marking: str
    role: str | None
    verdict: str | None
    state: str
    end: str | None
    fault: str | None
    started_utc: str
    box: str
    simulated: bool

    @property
    def name(self) -> str:
        """The record's name for people."""
        return f"R{self.id}"

    def as_json(self) -> dict[str, Any]:
        """The same as a document."""
        return {"record": self.name, **asdict(self)}


def number_of(name: str | int) -> int:
    """Return the number of a record's name. UsageError if it is none."""
    match = re.fullmatch(r"[Rr]?0*([0-9]{1,12})", str(name).strip())
    if not match:
        raise UsageError(
            f"{name!r} is no record's name.",
            remedy="Records are named like R17; list them with: dwellbench records list.",
        )
    return int(match[1])


_SUMMARY = (
    "SELECT run.id, label, marking, role, verdict, state, end, fault, started_utc, box.unique_id AS box, simulated"
    " FROM run JOIN box ON box.id = run.box"
)


def find(connection: sqlite3.Connection, where: dict[str, Any], limit: int, offset: int) -> list[Summary]:
    """Return summaries, newest first. `where` has text, verdict, label, since, until, box, simulated; None is any."""
    clauses, values = _conditions(where)
    sql = _SUMMARY + (" WHERE " + " AND ".join(clauses) if clauses else "")
    rows = connection.execute(
        sql + " ORDER BY run.id DESC LIMIT ? OFFSET ?", (*values, limit, offset)
    ).fetchall()
    return [Summary(**{**dict(row), "simulated": bool(row["simulated"])}) for row in rows]


def count(connection: sqlite3.Connection, where: dict[str, Any]) -> int:
    """How many records match."""
    clauses, values = _conditions(where)
    sql = "SELECT count(*) FROM run JOIN box ON box.id = run.box" + (
        " WHERE " + " AND ".join(clauses) if clauses else ""
    )
    return int(connection.execute(sql, values).fetchone()[0])


_WHERE = {
    "verdict": "verdict = ?",
    "label": "label = ?",
    "since": "started_utc >= ?",
    "until": "started_utc < ?",
    "box": "box.unique_id = ?",
}


def _conditions(where: dict[str, Any]) -> tuple[list[str], list[Any]]:
    clauses, values = [], []
    for name, clause in _WHERE.items():
        if where.get(name) is not None:
            clauses.append(clause)
            values.append(where[name])
    if where.get("simulated") is not None:
        clauses.append("simulated = ?")
        values.append(int(where["simulated"]))
    if where.get("text"):
        escaped = re.sub(r"([%_\\])", r"\\\1", where["text"])
        clauses.append("(label LIKE ? ESCAPE '\\' OR marking LIKE ? ESCAPE '\\' OR note LIKE ? ESCAPE '\\')")
        values.extend([f"%{escaped}%"] * 3)
    return clauses, values


_PLAIN = [
    "run_key",
    "firmware",
    "build",
    "label",
    "note",
    "marking",
    "role",
    "grade",
    "started_utc",
    "ended_utc",
    "state",
    "end",
    "fault",
    "why",
    "verdict",
    "sample_count",
]


def show(connection: sqlite3.Connection, name: str | int) -> dict[str, Any]:
    """Return one whole record but its samples. UsageError if there is none of this name."""
    number = number_of(name)
    row = connection.execute(
        "SELECT run.*, box.unique_id, box.model, calibration.document AS calibration_document FROM run JOIN box ON box.id = run.box"
        " LEFT JOIN calibration ON calibration.id = run.calibration WHERE run.id = ?",
        (number,),
    ).fetchone()
    if row is None:
        raise UsageError(f"There is no record R{number}.", remedy="List them with: dwellbench records list.")
    record: dict[str, Any] = {"record": f"R{number}", **{key: row[key] for key in _PLAIN}}
    record["simulated"] = bool(row["simulated"])
    record["box"], record["model"] = row["unique_id"], row["model"]
    record["part"], record["plan"] = json.loads(row["part"]), json.loads(row["plan"])
    document = row["calibration_document"]
    record["calibration"] = None if document is None else json.loads(document)
    record["events"] = [
        {"kind": event["kind"], **json.loads(event["document"])}
        for event in connection.execute(
            "SELECT kind, document FROM event WHERE run = ? ORDER BY number", (number,)
        )
    ]
    record["outcomes"] = [
        {"made_utc": outcome["made_utc"], **json.loads(outcome["document"])}
        for outcome in connection.execute(
            "SELECT made_utc, document FROM outcome WHERE run = ? ORDER BY id", (number,)
        )
    ]
    return record


def samples(connection: sqlite3.Connection, name: str | int) -> NDArray[np.int64]:
    """Return a record's sample rows, shape (n, 18). StoreError if they are not what was written."""
    number = number_of(name)
    row = connection.execute("SELECT samples, samples_hash FROM run WHERE id = ?", (number,)).fetchone()
    if row is None:
        raise UsageError(f"There is no record R{number}.", remedy="List them with: dwellbench records list.")
    if row["samples"] is None:
        query = "SELECT samples FROM sample_batch WHERE run = ? ORDER BY number"
        pieces = [unpack(batch["samples"]) for batch in connection.execute(query, (number,))]
        return np.concatenate(pieces) if pieces else np.zeros((0, 18), dtype=np.int64)
    try:
        table = unpack(row["samples"])
    except ValueError:
        table = np.zeros((0, 18), dtype=np.int64)
    if hash_of(table) != row["samples_hash"]:
        raise StoreError(
            f"The samples of R{number} are damaged.",
            remedy="Restore them from a backup; the outcome is kept apart.",
        )
    return table
