"""Where the firmware and the protocol lie: in a wheel beside this file, in a checkout two levels up."""

from __future__ import annotations

import hashlib
from functools import cache
from pathlib import Path

from dwellbench.errors import BugError

_HERE = Path(__file__).resolve().parent


def _find(name: str, marker: str) -> Path:
    for place in (_HERE / f"_{name}", _HERE.parents[1] / name):
        if (place / marker).is_file():
            return place
    raise BugError(
        f"The installed package lacks its folder {name!r}.",
        remedy="Install dwellbench again from a whole wheel or checkout.",
    )


@cache
def device() -> Path:
    """The folder that is copied to the board: main.py, reference_box.json, dwellbox/."""
    return _find("device", "reference_box.json")


@cache
def protocol() -> Path:
    """The folder of the wire's schemas and codes."""
    return _find("protocol", "codes.json")


@cache
def build_hash() -> str:
    """Eight hex digits over names and contents of all firmware files."""
    digest = hashlib.sha256()
    root = device()
    for path in sorted(root.rglob("*")):
        if path.suffix in (".py", ".json"):
            digest.update(path.relative_to(root).as_posix().encode() + b"\0" + path.read_bytes() + b"\0")
    return digest.hexdigest()[:8]
