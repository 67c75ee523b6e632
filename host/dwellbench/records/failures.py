"""Every failure of the file in plain words: what it is, and what to do about it."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from dwellbench.errors import StoreError

_OTHER_FILE = "Name the right file, or one that does not exist yet."

# SQLite's primary result code: a word for programs (`details["cause"]`), a sentence, a remedy.
_SAY = {
    sqlite3.SQLITE_NOTADB: ("not_records", "{path} is not a records file.", _OTHER_FILE),
    sqlite3.SQLITE_READONLY: (
        "read_only",
        "{path} cannot be written.",
        "Give yourself the right to write there, or name another file with --records.",
    ),
    sqlite3.SQLITE_PERM: ("no_right", "{path} may not be opened.", "Give yourself the right to read it."),
    sqlite3.SQLITE_CANTOPEN: (
        "cannot_open",
        "{path} cannot be opened.",
        "Check folder and rights, or name another file with --records.",
    ),
    sqlite3.SQLITE_FULL: (
        "full",
        "The disk is full; {path} cannot grow.",
        "Make room. Everything written before is kept.",
    ),
    sqlite3.SQLITE_IOERR: (
        "disk",
        "The disk refuses to read or write {path}.",
        "Copy what can be read to another disk; then look at this one. Everything written before is kept.",
    ),
    sqlite3.SQLITE_BUSY: (
        "locked",
        "{path} is being written by another program.",
        "Wait until it is done, or name another file with --records.",
    ),
    sqlite3.SQLITE_CORRUPT: (
        "damaged",
        "{path} is damaged.",
        "Copy the file before anything else; then restore the newest backup.",
    ),
}


@contextmanager
def explained(path: Path) -> Iterator[None]:
    """Turn SQLite's errors into StoreError with a sentence, a remedy and a `cause`."""
    try:
        yield
    except sqlite3.Error as error:
        raise _explain(path, getattr(error, "sqlite_errorcode", None), str(error)) from None
    except UnicodeDecodeError as error:  # a name in the file's own directory, quoted in SQLite's message
        raise _explain(path, sqlite3.SQLITE_CORRUPT, str(error)) from None


def _explain(path: Path, code: int | None, error: str) -> StoreError:
    cause, sentence, remedy = _SAY.get(
        0
        if code is None
        else code & 0xFF,  # the low byte is the primary code, the rest tells variants of it apart
        ("unusable", f"The records in {{path}} cannot be used ({error}).", _OTHER_FILE),
    )
    return StoreError(sentence.format(path=path), remedy=remedy, cause=cause, sqlite=error)


def damaged(record: str, what: str) -> StoreError:
    """The error for a record that is not what was written; `what` is a sentence."""
    return StoreError(
        f"{record} is damaged. {what}",
        remedy="Restore the records from a backup.",
        cause="damaged",
        record=record,
        what=what,
    )
