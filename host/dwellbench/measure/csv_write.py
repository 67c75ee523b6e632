"""Writes a trace to its file. Numbers are written in full, so that what is read back is the same trace."""

from __future__ import annotations

from math import isnan
from pathlib import Path
from typing import Any

import numpy as np

from dwellbench.measure.columns import MARKS, WRITTEN
from dwellbench.measure.trace import Trace


def write_csv(trace: Trace, path: str | Path) -> None:
    """Write `trace` to `path`, UTF-8, header keys first as `# key = value`. May raise OSError."""
    Path(path).write_text(csv_text(trace), encoding="utf-8", newline="\n")


def csv_text(trace: Trace) -> str:
    """The file's text."""
    lines = [f"# {key} = {_header(value)}" for key, value in trace.header.items()]
    lines.append(",".join(WRITTEN))
    columns = [_column(trace, name) for name in WRITTEN]
    lines.extend(",".join(cells) for cells in zip(*columns, strict=True))
    return "\n".join(lines) + "\n"


def _header(value: Any) -> str:
    text = repr(value) if isinstance(value, float) else str(value)
    return " ".join(text.split())


def _column(trace: Trace, name: str) -> list[str]:
    values: np.ndarray[Any, Any] = getattr(trace, name)
    if name == "stage":
        return [str(value) for value in values]
    if name in MARKS:
        return ["1" if value else "0" for value in values]
    return ["" if isnan(value) else repr(value) for value in values.tolist()]
