"""Opening the file: is it ours, which version, may we write."""

from __future__ import annotations

import os
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from dwellbench.errors import StoreError
from dwellbench.records.failures import explained
from dwellbench.records.migrate import migrate
from dwellbench.records.schema import APPLICATION_ID, VERSION

# How long a writer waits for another one: a transaction here takes milliseconds, so five seconds mean that something hangs.
WAIT_S = 5.0


def now_utc() -> str:
    """This instant, to the second, as records have it."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def open_database(path: Path, wait_s: float = WAIT_S) -> tuple[sqlite3.Connection, bool]:
    """Open or make the file, checked and migrated; say whether it can be written. Raises StoreError.

    A file that may only be read (a backup on a write-protected medium, someone else's) is opened for reading.
    """
    _refuse(path)
    if path.exists() and not os.access(path, os.W_OK, effective_ids=os.access in os.supports_effective_ids):
        return _open_for_reading(path, wait_s), False
    try:
        return _open(path, wait_s), True
    except StoreError as error:  # the folder may be what cannot be written: there is no place for a log
        if error.details.get("cause") not in ("read_only", "cannot_open") or not path.exists():
            raise
        return _open_for_reading(path, wait_s), False


def _refuse(path: Path) -> None:
    """What can be told before SQLite touches it (which would wait for ever on a pipe), and the folder."""
    if path.is_dir():
        raise StoreError(f"{path} is a folder.", remedy="Name a file for the records.", cause="folder")
    if path.exists() and not path.is_file():
        raise StoreError(
            f"{path} is a device or a pipe.", remedy="Name a file for the records.", cause="not_records"
        )
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise StoreError(
            f"The folder {path.parent} cannot be made: {error.strerror}.",
            remedy="Name another file.",
            cause="folder",
        ) from None


def _open(path: Path, wait_s: float) -> sqlite3.Connection:
    with explained(path):
        connection = _connect(str(path.absolute()), wait_s)  # absolute: `:memory:` is a name like any other
        try:
            check_identity(path, connection)
            _configure(connection)
            migrate(path, connection, now_utc())
        except BaseException:
            connection.close()
            raise
    return connection


def _open_for_reading(path: Path, wait_s: float) -> sqlite3.Connection:
    """Read-only; and where even the log's index cannot be made, as a file that nobody writes, if it has no log."""
    try:
        return _open_as(path, "mode=ro", wait_s)
    except StoreError as error:
        if error.details.get("cause") not in ("read_only", "cannot_open") or Path(f"{path}-wal").exists():
            raise
        return _open_as(path, "immutable=1", wait_s)


def _open_as(path: Path, way: str, wait_s: float) -> sqlite3.Connection:
    with explained(path):
        connection = _connect(f"{path.absolute().as_uri()}?{way}", wait_s, uri=True)
        try:
            check_identity(path, connection)
            same_version(path, connection)
        except BaseException:
            connection.close()
            raise
    return connection


def _connect(where: str, wait_s: float, *, uri: bool = False) -> sqlite3.Connection:
    connection = sqlite3.connect(where, timeout=wait_s, isolation_level=None, uri=uri)
    connection.row_factory = sqlite3.Row
    return connection


def check_identity(path: Path, connection: sqlite3.Connection) -> None:
    """Refuse another program's file and a newer version, before anything is changed."""
    identity = connection.execute("PRAGMA application_id").fetchone()[0]
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    tables = connection.execute("SELECT count(*) FROM sqlite_master").fetchone()[0]
    if identity != APPLICATION_ID and (tables or identity or version):
        raise StoreError(
            f"{path} belongs to another program.",
            remedy="Name another file for the records.",
            cause="not_records",
        )
    if version > VERSION:
        raise StoreError(
            f"{path} was written by a newer dwellbench (its version {version}, this one knows {VERSION}).",
            remedy="Install the newer dwellbench, or name another file.",
            cause="newer",
        )


def same_version(path: Path, connection: sqlite3.Connection) -> None:
    """Refuse to go on when the file is of another version than this program writes: another one may have changed it."""
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    if version > VERSION:
        raise StoreError(
            f"Another program has made {path} newer meanwhile (version {version}).",
            remedy="Install the newer dwellbench.",
            cause="newer",
        )
    if version < VERSION:
        raise StoreError(
            f"{path} is of an older version ({version}) and cannot be written, so it cannot be brought up to date.",
            remedy="Copy it to where you may write, and name the copy.",
            cause="older",
        )


def _configure(connection: sqlite3.Connection) -> None:
    """Write-ahead log: readers and a writer at once; a commit survives a killed program (`transaction` on power cuts)."""
    connection.execute("PRAGMA journal_mode = WAL")
    connection.execute("PRAGMA synchronous = NORMAL")
    connection.execute("PRAGMA foreign_keys = ON")


@contextmanager
def waiting(connection: sqlite3.Connection, wait_s: float, usual_s: float) -> Iterator[None]:
    """Wait only so long for another writer inside the block."""
    connection.execute(f"PRAGMA busy_timeout = {round(wait_s * 1000)}")
    try:
        yield
    finally:
        connection.execute(f"PRAGMA busy_timeout = {round(usual_s * 1000)}")
