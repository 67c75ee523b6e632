"""Closing a run: its samples into one piece, its end, its outcome and its digest, all in one transaction.

There is no moment at which samples are neither here nor there, and a batch that cannot be read is left where it is.
"""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dwellbench.records.adding import add_outcome
from dwellbench.records.digest import run_digest
from dwellbench.records.packing import COLUMNS, hash_of, pack, unpack
from dwellbench.records.transaction import transaction


@dataclass(frozen=True)
class Closing:
    """How a run ended. `state` is ended or interrupted; `end` and `fault` are the box's words, `why` is a sentence."""

    state: str
    end: str | None = None
    fault: str | None = None
    why: str | None = None
    outcome: dict[str, Any] | None = None


def close_run(connection: sqlite3.Connection, run: int, closing: Closing, ended_utc: str) -> None:
    """Close it. Survives a power cut from here on."""
    with transaction(connection, durable=True):
        table, whole, torn = _batches(connection, run)
        packed, digest = pack(table), hash_of(table)
        if hash_of(unpack(packed)) != digest:  # the batches go now, and nothing else has what was in them
            raise ValueError(f"the samples of R{run} cannot be packed without loss")
        connection.execute("INSERT INTO trace (run, samples, hash) VALUES (?, ?, ?)", (run, packed, digest))
        connection.executemany(
            "DELETE FROM sample_batch WHERE run = ? AND number = ?", [(run, n) for n in whole]
        )
        connection.execute(
            "UPDATE run SET state = ?, end = ?, fault = ?, why = ?, ended_utc = ?, sample_count = ? WHERE id = ?",
            (closing.state, closing.end, closing.fault, _why(closing, torn), ended_utc, len(table), run),
        )
        if closing.outcome is not None:
            add_outcome(connection, run, closing.outcome, ended_utc)
        connection.execute("UPDATE run SET digest = ? WHERE id = ?", (run_digest(connection, run), run))


def _batches(connection: sqlite3.Connection, run: int) -> tuple[NDArray[np.int64], list[int], list[int]]:
    """Rows in order, shape (n, 18), and the numbers of the batches they came from and of those that cannot be read."""
    pieces, whole, torn = [np.zeros((0, COLUMNS), dtype=np.int64)], [], []
    query = "SELECT number, samples FROM sample_batch WHERE run = ? ORDER BY number"
    for number, samples in connection.execute(query, (run,)):
        try:
            pieces.append(unpack(samples))
            whole.append(number)
        except ValueError:
            torn.append(number)
    return np.concatenate(pieces), whole, torn


def _why(closing: Closing, torn: list[int]) -> str | None:
    if not torn:
        return closing.why
    said = f"{len(torn)} second(s) of its samples are damaged and left out"
    return said if closing.why is None else f"{closing.why}; {said}"
