"""Transactions: all of it or nothing when writing, one moment of the file when reading."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager


@contextmanager
def transaction(connection: sqlite3.Connection, *, durable: bool = False) -> Iterator[None]:
    """Take the write lock at once; commit at the end, or roll back.

    What was committed survives a killed program. `durable` makes it survive a power cut too, by waiting for the disk (and with
    it everything committed before): for beginnings and ends of runs, not for every second of samples.
    """
    if durable:
        connection.execute("PRAGMA synchronous = FULL")
    try:
        connection.execute("BEGIN IMMEDIATE")
        try:
            yield
            connection.execute("COMMIT")
        except BaseException:
            if connection.in_transaction:  # a full disk has rolled back by itself
                connection.execute("ROLLBACK")
            raise
    finally:
        if durable:
            connection.execute("PRAGMA synchronous = NORMAL")


@contextmanager
def snapshot(connection: sqlite3.Connection) -> Iterator[None]:
    """Everything read inside is of one moment, whatever another program writes meanwhile."""
    connection.execute("BEGIN")
    try:
        yield
    finally:
        if connection.in_transaction:
            connection.execute("COMMIT")
