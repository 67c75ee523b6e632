"""The raw trace: one run's sample rows as the box sent them, whole numbers in converter codes."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dwellbench.errors import TraceError

COLUMNS: tuple[str, ...] = (
    *("n", "t", "stage", "shunt", "range"),
    *("nv", "sv", "vmin", "vmax"),
    *("ni", "si", "imin", "imax", "iclip"),
    *("vs", "temp", "flags", "vrange"),
)
"""The members of a sample row, in order."""


@dataclass(frozen=True)
class RawTrace:
    """`rows` has shape (rows, 18), int64, columns as `COLUMNS`; `info` says whose they are.

    `info` may have: run, run_key, box, firmware, boot, end, fault (names as in codes.json), look_pf,
    time_utc, simulated.
    """

    rows: NDArray[np.int64]
    info: Mapping[str, Any] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Refuse a table of another width."""
        if self.rows.ndim != 2 or self.rows.shape[1] != len(COLUMNS):
            wrong = f"Sample rows have {len(COLUMNS)} members; these have shape {self.rows.shape}."
            raise TraceError(wrong, remedy="Take the rows as the box sent them.")

    @classmethod
    def from_rows(cls, rows: Iterable[Sequence[int]], info: Mapping[str, Any] | None = None) -> RawTrace:
        """Take rows in any order, some perhaps twice (a link that was taken up again): sorted by `n`, each
        once.
        """
        unique = {int(row[0]): tuple(row) for row in rows}
        if any(len(row) != len(COLUMNS) for row in unique.values()):
            raise TraceError(
                "A sample row has too few or too many members.", remedy="Take the rows as the box sent them."
            )
        ordered = [unique[n] for n in sorted(unique)]
        table = np.array(ordered, dtype=np.int64).reshape(len(ordered), len(COLUMNS))
        return cls(table, dict(info or {}))

    def column(self, name: str) -> NDArray[np.int64]:
        """One column by name."""
        return np.asarray(self.rows[:, COLUMNS.index(name)])

    def __len__(self) -> int:
        """Rows."""
        return int(self.rows.shape[0])
