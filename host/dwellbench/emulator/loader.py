"""The firmware's own files brought to life inside CPython, each time anew and apart from all other modules.

As after a reset of a board, nothing is left of an earlier life: every `Firmware` has modules of its own, so several boxes can
live in one process. What the firmware imports is looked for first among its own files and else in a short list of what
MicroPython has on the board too; anything else is refused here as it would be there.
"""

from __future__ import annotations

import builtins
from collections.abc import Mapping, Sequence
from functools import cache
from pathlib import Path
from types import CodeType, ModuleType
from typing import Any

# What the board's MicroPython and CPython both have. `micropython` and `machine` are not in it: the firmware must do without
# them where they are missing.
SHARED = frozenset({"array", "binascii", "collections", "errno", "gc", "hashlib", "io", "json", "math"})
SHARED |= {"os", "random", "re", "select", "struct", "sys", "time"}


class Firmware:
    """One life of the firmware in `folder`. `module(name)` imports; ImportError for what a board could not import either."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._modules: dict[str, ModuleType] = {}
        self._builtins = {**vars(builtins), "__import__": self._import}

    def module(self, name: str) -> ModuleType:
        """Return the module of that dotted name, run once."""
        if name in self._modules:
            return self._modules[name]
        path = self._path(name)
        if path is None:
            raise ImportError(f"the firmware has no module {name!r}")
        package, _, last = name.rpartition(".")
        parent = self.module(package) if package else None
        made = ModuleType(name)
        made.__file__ = str(path)
        made.__package__ = name if path.name == "__init__.py" else package
        vars(made)["__builtins__"] = self._builtins
        self._modules[name] = made
        try:
            exec(_code(path, path.stat().st_mtime_ns), vars(made))
        except BaseException:
            del self._modules[name]
            raise
        if parent is not None:
            setattr(parent, last, made)
        return made

    def _path(self, name: str) -> Path | None:
        place = self._folder.joinpath(*name.split("."))
        for path in (place / "__init__.py", place.with_suffix(".py")):
            if path.is_file():
                return path
        return None

    def _import(
        self,
        name: str,
        globals: Mapping[str, Any] | None = None,
        locals: Mapping[str, Any] | None = None,
        fromlist: Sequence[str] | None = (),
        level: int = 0,
    ) -> ModuleType:
        """What the firmware's `import` does."""
        full = _absolute(name, str((globals or {}).get("__package__") or ""), level)
        if self._path(full) is None:
            if not level and name.split(".")[0] in SHARED:
                return builtins.__import__(name, globals, locals, fromlist or (), 0)
            raise ImportError(f"no module named {name!r} on the board")
        found = self.module(full)
        for item in fromlist or ():
            if not hasattr(found, item) and self._path(f"{full}.{item}"):
                self.module(f"{full}.{item}")
        return found if fromlist else self.module(full.split(".")[0])


def _absolute(name: str, package: str, level: int) -> str:
    if not level:
        return name
    above = package.split(".")
    kept = above[: len(above) - level + 1]
    return ".".join([*kept, *([name] if name else [])])


@cache
def _code(path: Path, changed_ns: int) -> CodeType:
    """Compiled once for all lives; under its real path, so that tracebacks and coverage find it."""
    return compile(path.read_text(encoding="utf-8"), str(path), "exec", dont_inherit=True)
