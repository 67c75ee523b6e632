"""Opening the file: is it ours, which version, may we write; and every failure in plain words."""

from __future__ import annotations

import shutil
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from dwellbench.errors import StoreError
from dwellbench.records.schema import APPLICATION_ID, MIGRATIONS, VERSION

# How long a writer waits for another one: a transaction here takes milliseconds, so five seconds mean that something hangs.
WAIT_S = 5.0


def now_utc() -> str:
    """This instant, to the second, as records have it."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def open_database(path: Path) -> sqlite3.Connection:
    """Open or make the file, checked and migrated. Raises StoreError."""
    if path.is_dir():
        raise StoreError(f"{path} is a folder.", remedy="Name a file for the records.")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise StoreError(
            f"The folder {path.parent} cannot be made: {error.strerror}.", remedy="Name another file."
        ) from None
    with explained(path):
        connection = sqlite3.connect(path, timeout=WAIT_S, isolation_level=None)
        connection.row_factory = sqlite3.Row
        try:
            _check(path, connection)
            _configure(connection)
            _migrate(path, connection)
        except BaseException:
            connection.close()
            raise
    return connection


@contextmanager
def explained(path: Path) -> Iterator[None]:
    """Turn SQLite's errors into StoreError with a sentence and a remedy."""
    try:
        yield
    except sqlite3.Error as error:
        raise _explain(path, error) from None


def _explain(path: Path, error: sqlite3.Error) -> StoreError:
    text = str(error)
    for words, sentence, remedy in _SAY:
        if words in text:
            return StoreError(sentence.format(path=path), remedy=remedy, sqlite=text)
    return StoreError(
        f"The records in {path} cannot be used ({text}).",
        remedy="Name another file, or restore a copy.",
        sqlite=text,
    )


_SAY = (
    (
        "not a database",
        "{path} is not a records file.",
        "Name the right file, or one that does not exist yet.",
    ),
    (
        "readonly",
        "{path} cannot be written.",
        "Give yourself the right to write there, or name another file with --records.",
    ),
    (
        "unable to open",
        "{path} cannot be opened.",
        "Check folder and rights, or name another file with --records.",
    ),
    (
        "disk is full",
        "The disk is full; {path} cannot grow.",
        "Make room. Everything written before is kept.",
    ),
    (
        "locked",
        "{path} is being written by another program.",
        "Wait until it is done, or name another file with --records.",
    ),
    (
        "malformed",
        "{path} is damaged.",
        "Copy the file before anything else; then restore the newest backup.",
    ),
)


def _check(path: Path, connection: sqlite3.Connection) -> None:
    """Refuse another program's file and a newer version, before anything is changed."""
    identity = connection.execute("PRAGMA application_id").fetchone()[0]
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    tables = connection.execute("SELECT count(*) FROM sqlite_master").fetchone()[0]
    if identity != APPLICATION_ID and (tables or identity or version):
        raise StoreError(f"{path} belongs to another program.", remedy="Name another file for the records.")
    if version > VERSION:
        raise StoreError(
            f"{path} was written by a newer dwellbench (its version {version}, this one knows {VERSION}).",
            remedy="Install the newer dwellbench, or name another file.",
        )


def _configure(connection: sqlite3.Connection) -> None:
    """Write-ahead log: readers and a writer at once; a commit survives a killed program, and an ended run a power cut."""
    connection.execute("PRAGMA journal_mode = WAL")
    connection.execute("PRAGMA synchronous = NORMAL")
    connection.execute("PRAGMA foreign_keys = ON")


def _migrate(path: Path, connection: sqlite3.Connection) -> None:
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    if version == VERSION:
        return
    if version:
        connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
        shutil.copy2(path, path.with_name(f"{path.name}.version-{version}.copy"))
    for number in range(version, VERSION):
        _step(connection, number)


def _step(connection: sqlite3.Connection, number: int) -> None:
    """One migration in one transaction; another process may have made it meanwhile."""
    what, sql = MIGRATIONS[number]
    connection.execute("BEGIN IMMEDIATE")
    try:
        if connection.execute("PRAGMA user_version").fetchone()[0] == number:
            for statement in sql.split(";"):
                if statement.strip():
                    connection.execute(statement)
            connection.execute("INSERT INTO migration VALUES (?, ?, ?)", (number + 1, what, now_utc()))
            connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
            connection.execute(f"PRAGMA user_version = {number + 1}")
        connection.execute("COMMIT")
    except BaseException:
        connection.execute("ROLLBACK")
        raise
