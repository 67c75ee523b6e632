"""A whole copy of the file, taken while others go on writing it."""

from __future__ import annotations

import os
import sqlite3
from contextlib import closing
from pathlib import Path

from dwellbench.errors import StoreError
from dwellbench.records.failures import explained


def copy_database(path: Path, target: Path) -> None:
    """Copy the last committed state to `target`, which must not exist; it appears whole or not at all. Raises StoreError."""
    if target.exists():
        raise StoreError(f"{target} is there already.", remedy="Name a file that is not.", cause="exists")
    part = target.with_name(f"{target.name}.part")
    try:
        with explained(target):
            _copy(path, part)
        _keep(part)
        os.replace(part, target)
    except OSError as error:
        raise StoreError(
            f"{target} cannot be written: {error.strerror}.",
            remedy="Name another place.",
            cause="cannot_open",
        ) from None
    finally:
        part.unlink(missing_ok=True)


def _copy(path: Path, part: Path) -> None:
    """SQLite's own way takes what is still in the log along. The copy leaves the log behind: it is one file."""
    part.unlink(missing_ok=True)
    source = sqlite3.connect(f"{path.absolute().as_uri()}?mode=ro", uri=True)
    with closing(source), closing(sqlite3.connect(str(part.absolute()))) as copy:
        source.backup(copy)
        copy.execute("PRAGMA journal_mode = DELETE")


def _keep(part: Path) -> None:
    """Wait until the disk has it: the file it is a copy of is about to be changed."""
    with open(part, "rb+") as file:
        os.fsync(file.fileno())
