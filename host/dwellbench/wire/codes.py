"""States, faults, ends and errors by name, from the protocol's one source of them."""

from __future__ import annotations

import json
from functools import cache
from typing import Any

from dwellbench import assets

MAJOR = 1


@cache
def codes() -> dict[str, Any]:
    """The whole of codes.json."""
    loaded: dict[str, Any] = json.loads((assets.protocol() / "codes.json").read_text(encoding="utf-8"))
    return loaded


@cache
def names(group: str) -> tuple[str, ...]:
    """The ids of `states`, `stages`, `ends` or `faults`, by code."""
    return tuple(row["id"] for row in codes()[group])


@cache
def row(group: str, id_: str) -> dict[str, Any]:
    """The row of one id: its text, and for a fault its remedy."""
    for entry in codes()[group]:
        if entry["id"] == id_:
            return dict(entry)
    return {"id": id_, "text": id_.replace("_", " "), "remedy": ""}


@cache
def error_id(code: int) -> str:
    """The id of an error code."""
    for entry in codes()["errors"]:
        if entry["code"] == code:
            return str(entry["id"])
    return "unknown"
