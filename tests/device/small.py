"""Whole numbers that remember having been too large for the board's small integers, wherever arithmetic takes them."""

from __future__ import annotations

import sys
from collections.abc import Callable
from typing import Any

LEAST, MOST = -(1 << 30), (1 << 30) - 1

# Where a number left 31 bits: (file, line) -> the number. A test empties it and looks.
beyond: dict[tuple[str, int], int] = {}


class Small(int):
    """An int whose results are of its own kind, so that one of them in a sum watches the whole of it."""


def watched(value: Any) -> Any:
    """The same number, watched; what is no number is returned as it is."""
    if type(value) is not int and type(value) is not Small:
        return value
    if not LEAST <= value <= MOST:
        frame = sys._getframe(2)
        beyond[frame.f_code.co_filename.rpartition("/")[2], frame.f_lineno] = int(value)
    return Small(value)


def _wrap(name: str) -> Callable[..., Any]:
    plain = getattr(int, name)

    def operation(self: int, *others: Any) -> Any:
        return watched(plain(self, *others))

    return operation


for _name in ("add", "sub", "mul", "floordiv", "mod", "pow", "lshift", "rshift", "and", "or", "xor"):
    setattr(Small, f"__{_name}__", _wrap(f"__{_name}__"))
    setattr(Small, f"__r{_name}__", _wrap(f"__r{_name}__"))
for _name in ("neg", "abs", "invert"):
    setattr(Small, f"__{_name}__", _wrap(f"__{_name}__"))
