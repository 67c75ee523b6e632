"""Reads a trace file, from this program or elsewhere, and says exactly what is wrong with one that is
not a trace.

What the file leaves out: no `clipped` column means nothing clipped, no `range_V` the converter's wide range,
no `interval_s` the time since the row before (a row is the mean over the interval that ends at its time), no
`u_offset_A` half a code of the row's shunt and range.
"""

from __future__ import annotations

import csv
from collections.abc import Callable
from functools import partial
from math import isfinite
from pathlib import Path
from typing import Any

import numpy as np

from dwellbench.errors import TraceError
from dwellbench.measure.columns import (
    HEADER_NUMBERS,
    MARKS,
    NOT_NEGATIVE,
    OPTIONAL,
    POSITIVE,
    REQUIRED,
    SPREADS,
)
from dwellbench.measure.reference import reference_box
from dwellbench.measure.trace import Bools, Floats, Trace

_REMEDY = "Export the trace again, or mend that line; the columns are described in the help of `analyse`."
_MOST_BYTES = 64_000_000  # ten million seconds of rows would be a mistake, not a trace
_HALF_CODE = 0.5


def read_csv(path: str | Path) -> Trace:
    """Read the trace file at `path`. Raises TraceError naming file, line and remedy."""
    return _Reader(str(path)).read(Path(path))


def parse_csv(text: str, name: str = "trace") -> Trace:
    """Read a trace from a file's text; `name` stands for the file in messages. Raises TraceError."""
    return _Reader(name).parse(text)


class _Reader:
    """One file being read; knows its name and how to complain."""

    def __init__(self, name: str) -> None:
        self.name = name
        self.lines: list[int] = []  # line number of each row

    def wrong(self, what: str, line: int | None = None, remedy: str = _REMEDY) -> TraceError:
        where = f"{self.name}, line {line}" if line else self.name
        return TraceError(f"{where}: {what}.", remedy=remedy, file=self.name, line=line)

    def read(self, path: Path) -> Trace:
        try:
            if path.stat().st_size > _MOST_BYTES:
                raise self.wrong("the file is far too large for a trace")
            return self.parse(path.read_text(encoding="utf-8-sig"))
        except UnicodeDecodeError:
            raise self.wrong("the file is not text in UTF-8") from None
        except OSError as failed:
            remedy = "Check the name and that the file may be read."
            raise self.wrong(f"the file cannot be read ({failed.strerror})", remedy=remedy) from None

    def parse(self, text: str) -> Trace:
        header: dict[str, Any] = {}
        names: list[str] | None = None
        rows: list[list[str]] = []
        for number, line in enumerate(text.lstrip("\ufeff").splitlines(), start=1):
            bare = line.strip()
            if not bare:
                continue
            if bare.startswith("#"):
                if names is None:
                    self._header(header, bare[1:], number)
                continue
            cells = [cell.strip() for cell in next(csv.reader([bare]))]
            if names is None:
                names = self._names(cells, number)
                continue
            if len(cells) != len(names):
                raise self.wrong(f"{len(cells)} cells where the head of the table has {len(names)}", number)
            self.lines.append(number)
            rows.append(cells)
        if names is None:
            raise self.wrong("the file has no table", remedy="A trace begins with the names of its columns.")
        if len(rows) < 2:
            raise self.wrong(f"the table has {len(rows)} row(s), and a trace needs at least two")
        columns = dict(zip(names, map(list, zip(*rows, strict=True)), strict=True))
        return self._trace(columns, header)

    def _header(self, header: dict[str, Any], text: str, line: int) -> None:
        key, equals, value = (part.strip() for part in text.partition("="))
        if not equals or not key:
            return  # a remark
        header[key] = self._header_number(key, value, line) if key in HEADER_NUMBERS else value

    def _header_number(self, key: str, text: str, line: int) -> float:
        try:
            value = float(text)
        except ValueError:
            raise self.wrong(f"{key} is {text!r}, which is not a number", line) from None
        if not isfinite(value) or (key in POSITIVE and value <= 0.0) or (key in NOT_NEGATIVE and value < 0.0):
            raise self.wrong(f"{key} cannot be {text}", line)
        return value

    def _names(self, cells: list[str], line: int) -> list[str]:
        missing = [name for name in REQUIRED if name not in cells]
        if missing:
            remedy = f"A trace has at least the columns {', '.join(REQUIRED)}, separated by commas."
            raise self.wrong(f"missing column(s) {', '.join(missing)}", line, remedy)
        known = [name for name in cells if name in (*REQUIRED, *OPTIONAL)]
        if len(set(known)) != len(known):
            raise self.wrong("a column stands twice in the head of the table", line)
        return cells

    def _numbers(self, columns: dict[str, list[str]], name: str, empty: bool = False) -> Floats:
        """One column as floats; with `empty`, an empty cell stands for a value that is not known."""
        cells = columns[name]
        try:
            values = np.array([float(cell) if cell or not empty else np.nan for cell in cells])
        except ValueError:
            at = next(k for k, cell in enumerate(cells) if not (_is_number(cell) or (empty and not cell)))
            raise self.wrong(f"{name} is {cells[at]!r}, which is not a number", self.lines[at]) from None
        bad = np.isinf(values) if empty else ~np.isfinite(values)
        if bad.any():
            at = int(np.argmax(bad))
            raise self.wrong(f"{name} is {cells[at]}, which is not a finite number", self.lines[at])
        return values

    def _first(self, bad: Bools, what: Callable[[int], str]) -> None:
        """Complain of the first row that is bad."""
        if bad.any():
            at = int(np.argmax(bad))
            raise self.wrong(what(at), self.lines[at])

    def _trace(self, columns: dict[str, list[str]], header: dict[str, Any]) -> Trace:
        values = {name: self._numbers(columns, name) for name in REQUIRED if name != "stage"}
        stage = np.array(columns["stage"], dtype=str)
        self._first(stage == "", lambda at: "stage is empty")
        back = np.diff(values["t_s"], prepend=-np.inf) <= 0.0
        self._first(back, lambda at: f"time does not advance (t_s = {columns['t_s'][at]})")
        self._first(values["shunt_ohm"] <= 0.0, lambda at: f"shunt_ohm is {columns['shunt_ohm'][at]}")
        for name in SPREADS:
            values[name] = (
                self._numbers(columns, name, empty=True) if name in columns else _unknown(len(stage))
            )
        values.update(self._optional(columns, values, header))
        self._some_reading(stage, values["clipped"], header)
        arrays: dict[str, Any] = {**values, **{name: self._mark(columns, name, len(stage)) for name in MARKS}}
        return Trace(stage=stage, header=header, **arrays)

    def _optional(
        self, columns: dict[str, list[str]], values: dict[str, Floats], header: dict[str, Any]
    ) -> dict[str, Floats]:
        """Clipping, range, interval and offset, or what stands in for them."""
        t_s = values["t_s"]
        step_s = np.diff(t_s)
        found = {
            "clipped": np.zeros(t_s.size),
            "range_V": np.full(t_s.size, reference_box().ranges_V[0]),
            "interval_s": np.concatenate(([np.median(step_s)], step_s)),
        }
        found.update({name: self._numbers(columns, name) for name in found if name in columns})
        for name in ("range_V", "interval_s"):
            self._first(found[name] <= 0.0, partial(_not_positive, name))
        self._first(found["clipped"] < 0.0, lambda at: "clipped is negative")
        if "u_offset_A" in columns:
            found["u_offset_A"] = np.abs(self._numbers(columns, "u_offset_A"))
        elif "u_offset_A" in header:
            found["u_offset_A"] = np.full(t_s.size, float(header["u_offset_A"]))
        else:
            found["u_offset_A"] = _HALF_CODE * found["range_V"] / 32768.0 / values["shunt_ohm"]
        return found

    def _mark(self, columns: dict[str, list[str]], name: str, size: int) -> Bools:
        return self._numbers(columns, name) != 0.0 if name in columns else np.zeros(size, dtype=bool)

    def _some_reading(self, stage: np.ndarray[Any, Any], clipped: Floats, header: dict[str, Any]) -> None:
        """A trace of a run that ended before the charge says so in its header; any other has rows that can be
        read.
        """
        measured = np.isin(stage, ("charge", "dwell"))
        if not measured.any() and "end" not in header:
            raise self.wrong("no row of the stages charge or dwell, so there is nothing to measure")
        if measured.any() and (clipped[measured] > 0.0).all():
            remedy = "Record it again on a lower shunt; a clipped reading is not a current."
            raise self.wrong("every reading of charge and dwell clipped", remedy=remedy)


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def _not_positive(name: str, at: int) -> str:
    return f"{name} is not positive"


def _unknown(size: int) -> Floats:
    return np.full(size, np.nan)
