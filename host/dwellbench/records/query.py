"""Finding records: a list, narrowed and paged. A record's number is shown as R17; both R17 and 17 name it."""

from __future__ import annotations

import re
import sqlite3
from dataclasses import asdict, dataclass
from typing import Any

from dwellbench.errors import UsageError
from dwellbench.records.folding import folded

_MOST = 2**63 - 1
"""What SQLite counts to."""


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


@dataclass(frozen=True)
class Where:
    """Which records; None is any.

    `text` is looked for in label, marking and notes, whatever the case; `since` is inclusive, `until` exclusive, both in UTC.
    """

    text: str | None = None
    verdict: str | None = None
    label: str | None = None
    marking: str | None = None
    since: str | None = None
    until: str | None = None
    box: str | None = None
    simulated: bool | None = None
    state: str | None = None


def number_of(name: str | int) -> int:
    """Return the number of a record's name. UsageError if it is none."""
    match = re.fullmatch(r"[Rr]?0*([0-9]{1,12})", str(name).strip(), re.ASCII)
    if not match:
        raise UsageError(
            f"{name!r} is no record's name.",
            remedy="Records are named like R17; list them with: dwellbench records list.",
        )
    return int(match[1])


_COLUMNS = "SELECT run.id, label, marking, role, verdict, state, end, fault, started_utc, box.unique_id AS box, simulated"
_FROM = " FROM run JOIN box ON box.id = run.box"


def find(connection: sqlite3.Connection, where: Where, limit: int, offset: int) -> list[Summary]:
    """Return summaries, newest first."""
    condition, values = _condition(where)
    page = (min(limit, _MOST), min(offset, _MOST))
    sql = f"{_COLUMNS}{_FROM}{condition} ORDER BY run.id DESC LIMIT ? OFFSET ?"
    return [_summary(row) for row in connection.execute(sql, (*values, *page))]


def summary(connection: sqlite3.Connection, run: int) -> Summary:
    """Return the line of one record, which must be there."""
    return _summary(connection.execute(f"{_COLUMNS}{_FROM} WHERE run.id = ?", (run,)).fetchone())


def count(connection: sqlite3.Connection, where: Where) -> int:
    """How many records match."""
    condition, values = _condition(where)
    if not condition:
        return int(connection.execute("SELECT count(*) FROM run").fetchone()[0])
    return int(connection.execute(f"SELECT count(*){_FROM}{condition}", values).fetchone()[0])


def _summary(row: sqlite3.Row) -> Summary:
    return Summary(**{**dict(row), "simulated": bool(row["simulated"])})


# The narrow index over `search` is read, not the rows with their plans and parts.
_TEXT = "(run.id IN (SELECT id FROM run WHERE instr(search, ?)) OR run.id IN (SELECT run FROM note WHERE instr(search, ?)))"
_WHERE = {
    "verdict": "verdict = ?",
    "label": "label = ?",
    "marking": "marking = ?",
    "since": "started_utc >= ?",
    "until": "started_utc < ?",
    "box": "box.unique_id = ?",
    "simulated": "simulated = ?",
    "state": "state = ?",
}


def _condition(where: Where) -> tuple[str, list[Any]]:
    given = {key: value for key, value in asdict(where).items() if value is not None and key != "text"}
    clauses, values = [_WHERE[key] for key in given], list(given.values())
    if where.text:
        clauses.append(_TEXT)
        values += [folded(where.text)] * 2
    values = [_plain(value) for value in values]
    return (" WHERE " + " AND ".join(clauses) if clauses else ""), values


def _plain(value: Any) -> Any:
    """Text that no file can hold is found nowhere; the replacement sign keeps it from being an error."""
    return value.encode(errors="replace").decode() if isinstance(value, str) else value
