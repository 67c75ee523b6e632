"""Making an older file newer: a copy first, then every step and the record of it in one transaction."""

from __future__ import annotations

import sqlite3
from contextlib import ExitStack
from pathlib import Path

from dwellbench.errors import StoreError
from dwellbench.records.copying import copy_database
from dwellbench.records.owner import BoxLock
from dwellbench.records.schema import APPLICATION_ID, MIGRATIONS, VERSION
from dwellbench.records.transaction import transaction


def migrate(path: Path, connection: sqlite3.Connection, made_utc: str) -> None:
    """Bring the file up to this program's version. Raises StoreError while a run is being written to an older file."""
    if _version(connection) == VERSION:
        return
    with ExitStack() as locks, transaction(connection, durable=True):
        version = _version(connection)  # another process may have been faster
        if 0 < version < VERSION:
            _keep_writers_out(path, connection, locks)
            copy_database(path, _copy_name(path, version))
        for number in range(version, VERSION):
            _step(connection, number, made_utc)


def _version(connection: sqlite3.Connection) -> int:
    return int(connection.execute("PRAGMA user_version").fetchone()[0])


def _copy_name(path: Path, version: int) -> Path:
    """A name beside the file that is not taken: an earlier copy is never overwritten."""
    number, name = 1, path.with_name(f"{path.name}.version-{version}.copy")
    while name.exists():
        number += 1
        name = path.with_name(f"{path.name}.version-{version}.copy-{number}")
    return name


def _keep_writers_out(path: Path, connection: sqlite3.Connection, locks: ExitStack) -> None:
    """The program that writes an open run knows the older tables only; changing them would cost it the end of its run."""
    boxes = connection.execute(
        "SELECT DISTINCT unique_id FROM run JOIN box ON box.id = run.box WHERE state = 'open'"
    )
    for row in boxes.fetchall():
        lock = BoxLock(path, row[0])
        if not lock.try_take():
            raise StoreError(
                f"An older dwellbench is writing a run into {path}, which must be brought up to date first.",
                remedy="Wait for the end of that run, or name another file with --records.",
                cause="locked",
            )
        locks.callback(lock.release)


def _step(connection: sqlite3.Connection, number: int, made_utc: str) -> None:
    what, sql, fill = MIGRATIONS[number]
    for statement in sql.split(";"):
        if statement.strip():
            connection.execute(statement)
    if fill is not None:
        fill(connection)
    connection.execute("INSERT INTO migration VALUES (?, ?, ?)", (number + 1, what, made_utc))
    connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    connection.execute(f"PRAGMA user_version = {number + 1}")
