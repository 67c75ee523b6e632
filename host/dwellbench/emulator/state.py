"""The file that keeps an emulated box between commands: flash and scratch, the world with its time, part and operator.

A box that is closed lives on as one whose host has gone: what was under way ends by itself, in virtual time, before the file is
written. Opening it again is a reset of its controller: scratch is kept, RAM is not. The file is also written after every write to
flash, so that of a program that was killed no more is lost than of a board whose plug was pulled. One program at a time may use it.
"""

from __future__ import annotations

import base64
import hashlib
import json
import os
from dataclasses import replace
from pathlib import Path
from typing import Any

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.errors import NoBoxError, UsageError

try:
    import fcntl
except ImportError:  # Windows: two programs on one file are not told apart there
    fcntl = None  # type: ignore[assignment]

_SCHEMA = 1
_PERIODS_PER_S = 200
_GOES_ON_S = (
    60  # the longest way from a host's silence to clean rest: 2 s, bleeding, 16 s of proof, and to spare
)
_STEPS = 20


class StateFile:
    """Holds the lock from construction until `release`. UsageError, NoBoxError when the file cannot be used."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._lock = _locked(path.with_name(path.name + ".lock"), path)

    def load(self, box: EmulatedBox) -> None:
        """Take up what is kept, if there is anything yet. UsageError when it is of another box."""
        try:
            text = self.path.read_text(encoding="utf-8")
        except FileNotFoundError:
            return
        except (OSError, UnicodeDecodeError) as error:
            raise _of_another(self.path, str(error)) from None
        try:
            restore(box, json.loads(text))
        except (ValueError, KeyError, TypeError, IndexError, AttributeError) as error:
            raise _of_another(self.path, str(error)) from None

    def save(self, box: EmulatedBox) -> None:
        """Write it whole, then rename it over the old one."""
        new = self.path.with_name(self.path.name + ".new")
        new.write_text(json.dumps(snapshot(box)), encoding="utf-8")
        os.replace(new, self.path)

    def release(self) -> None:
        """Let other programs use it."""
        if self._lock is not None:
            name, descriptor = self._lock
            name.unlink(missing_ok=True)
            os.close(descriptor)
            self._lock = None


def live_on(box: EmulatedBox) -> None:
    """The host has gone: let the box end by itself what is under way, up to a minute of virtual time."""
    box.link.attach(False)
    for _ in range(_GOES_ON_S * _PERIODS_PER_S // _STEPS):
        if not box.in_run:
            return
        for _ in range(_STEPS):
            box.tick()


def snapshot(box: EmulatedBox) -> dict[str, Any]:
    """Everything that lives on, JSON-able."""
    flash = {name: base64.b64encode(data).decode() for name, data in box.flash.items()}
    kept = {"schema": _SCHEMA, "scenario": _scenario_id(box), "scratch": box.scratch, "flash": flash}
    return {**kept, "world": box.world.snapshot()}


def restore(box: EmulatedBox, kept: dict[str, Any]) -> None:
    """Take up a snapshot and ask for a reset. ValueError and its like when it is not of this box."""
    if kept["schema"] != _SCHEMA:
        raise ValueError("it was written by another version")
    if kept["scenario"] != _scenario_id(box):
        raise ValueError("it is of another scenario")
    box.flash = {name: base64.b64decode(data) for name, data in kept["flash"].items()}
    box.scratch = int(kept["scratch"])
    box.world.restore(kept["world"])
    if box.world.powered:
        box.world.ask_reset()


def _scenario_id(box: EmulatedBox) -> str:
    """Of what the scenario says; the seed is compared by the world."""
    return hashlib.sha256(repr(replace(box.world.scenario, seed=0)).encode()).hexdigest()[:16]


def _of_another(path: Path, why: str) -> UsageError:
    return UsageError(
        f"{path} does not keep this emulated box ({why}).",
        remedy="Name the state file of the same scenario and seed, or a new file.",
    )


def _locked(name: Path, path: Path) -> tuple[Path, int] | None:
    """A lock that goes with the process that holds it. It also tells early whether the folder can be written to."""
    while True:
        try:
            descriptor = os.open(name, os.O_RDWR | os.O_CREAT, 0o666)
        except OSError as error:
            raise UsageError(
                f"{path} cannot be written: {error.strerror}.", remedy="Choose a file in a folder of yours."
            ) from None
        if fcntl is None:
            return name, descriptor
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            os.close(descriptor)
            raise NoBoxError(
                f"The emulated box in {path} is in use by another program.",
                remedy="Wait until that is over, or name another file.",
            ) from None
        if _is_still(name, descriptor):
            return name, descriptor
        os.close(descriptor)  # removed by its last holder between our opening and locking it


def _is_still(name: Path, descriptor: int) -> bool:
    try:
        return os.stat(name).st_ino == os.fstat(descriptor).st_ino
    except FileNotFoundError:
        return False
