"""Reading TOML tables strictly: a key that is not known, or a value that cannot be, is refused by name,
with what to do."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from difflib import get_close_matches
from math import isfinite
from typing import Any

from dwellbench.errors import UsageError

Check = Callable[[Any], Any]
"""Gives the value in its proper type, or raises ValueError with what it must be."""


def number(least: float | None = None, above: float | None = None, most: float | None = None) -> Check:
    """A finite number, at least `least`, above `above`, at most `most`."""

    def check(value: Any) -> float:
        if isinstance(value, bool) or not isinstance(value, int | float) or not isfinite(value):
            raise ValueError("must be a finite number")
        if least is not None and value < least:
            raise ValueError(f"must be at least {least:g}")
        if above is not None and value <= above:
            raise ValueError(f"must be above {above:g}")
        if most is not None and value > most:
            raise ValueError(f"must be at most {most:g}")
        return float(value)

    return check


def whole(least: int, most: int) -> Check:
    """A whole number in the range."""

    def check(value: Any) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= most:
            raise ValueError(f"must be a whole number from {least} to {most}")
        return value

    return check


def text(value: Any) -> str:
    """A string."""
    if not isinstance(value, str):
        raise ValueError("must be text in quotes")
    return value


def flag(value: Any) -> bool:
    """true or false."""
    if not isinstance(value, bool):
        raise ValueError("must be true or false")
    return value


def one_of(*choices: str | int) -> Check:
    """One of the given."""

    def check(value: Any) -> str | int:
        if isinstance(value, bool) or value not in choices:
            raise ValueError("must be one of " + ", ".join(str(c) for c in choices))
        return value  # type: ignore[no-any-return]

    return check


def numbers(count: int, each: Check) -> Check:
    """A list of exactly `count` values."""

    def check(value: Any) -> tuple[Any, ...]:
        if not isinstance(value, list) or len(value) != count:
            raise ValueError(f"must be a list of {count} numbers")
        return tuple(each(item) for item in value)

    return check


def anything(value: Any) -> Any:
    """Any value."""
    return value


def read_table(source: str, where: str, raw: Any, fields: Mapping[str, Check]) -> dict[str, Any]:
    """The table's values, checked. `source` is the file, `where` the table within it; both go into the
    message."""
    if not isinstance(raw, dict):
        raise UsageError(f"{source}: {where} must be a table", remedy=f"Write it as {where}.", file=source)
    return {key: read_value(source, where, key, value, fields) for key, value in raw.items()}


def read_value(source: str, where: str, key: str, value: Any, fields: Mapping[str, Check]) -> Any:
    """One value, checked."""
    if key not in fields:
        near = get_close_matches(key, fields, 1)
        hint = f"Did you mean {near[0]!r}? " if near else ""
        remedy = f"{hint}Known here: {', '.join(sorted(fields))}."
        raise UsageError(f"{source}: {where} has an unknown key {key!r}", remedy=remedy, file=source, key=key)
    try:
        return fields[key](value)
    except ValueError as wrong:
        message = f"{source}: {key!r} in {where} {wrong}"
        raise UsageError(message, remedy=f"Change {key!r} in {where}.", file=source, key=key) from None
