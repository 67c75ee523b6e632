"""Which emulated box an `emu://` URL or the `emulate` command means, and the file that keeps it between commands.

    emu://film?seed=7                        a packaged scenario
    emu:///path/to/file.toml?seed=7          a file (three slashes)
    emu://film?state=box.json                the box lives on in that file: flash, latched reasons, operator, time
    emu://film?interpreter=micropython       the firmware under MicroPython
"""

from __future__ import annotations

import json
import os
import urllib.parse
from dataclasses import dataclass
from pathlib import Path

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.errors import UsageError

INTERPRETERS: dict[str, type[EmulatedBox]] = {"cpython": InProcessBox, "micropython": LockstepBox}
_KEYS = {"seed", "state", "interpreter"}


@dataclass(frozen=True)
class Opening:
    """What was asked for. `seed` None takes the scenario's."""

    scenario: str
    seed: int | None = None
    state: Path | None = None
    interpreter: str = "cpython"

    @classmethod
    def from_url(cls, url: str) -> Opening:
        """Read an emu:// URL. UsageError says what is wrong with it."""
        parts = urllib.parse.urlsplit(url)
        query = urllib.parse.parse_qs(parts.query, keep_blank_values=True)
        unknown = sorted(set(query) - _KEYS)
        if parts.scheme != "emu" or unknown:
            what = f"the key {unknown[0]!r}" if unknown else "the scheme"
            raise UsageError(f"{url}: {what} is not known.", remedy="Say emu://NAME?seed=N or emu:///path/file.toml.")
        name = urllib.parse.unquote(parts.netloc or parts.path)
        if parts.netloc and parts.path not in ("", "/"):
            name = urllib.parse.unquote(parts.netloc + parts.path)
        state = query.get("state", [None])[0]
        return cls(
            name or "film",
            _whole(url, query.get("seed", [None])[0]),
            None if state is None else Path(state),
            query.get("interpreter", ["cpython"])[0],
        )

    def make(self, time_scale: float | None = None) -> EmulatedBox:
        """Switch the box on, where it was left if it has a state file."""
        if self.interpreter not in INTERPRETERS:
            known = " or ".join(sorted(INTERPRETERS))
            raise UsageError(f"There is no interpreter {self.interpreter!r}.", remedy=f"Say {known}.")
        scenario = Scenario.load(self.scenario)
        box = INTERPRETERS[self.interpreter](scenario, self.seed, time_scale=time_scale)
        if self.state is not None and self.state.exists():
            _restore(box, self.state)
        return box

    def leave(self, box: EmulatedBox) -> None:
        """Keep the box in its state file, if it has one: written whole, then renamed over the old one."""
        if self.state is None:
            return
        new = self.state.with_name(self.state.name + ".new")
        new.write_text(json.dumps(box.snapshot()), encoding="utf-8")
        os.replace(new, self.state)


def _whole(url: str, text: str | None) -> int | None:
    if text is None:
        return None
    try:
        return int(text)
    except ValueError:
        raise UsageError(f"{url}: the seed must be a whole number, not {text!r}.", remedy="Say seed=7.") from None


def _restore(box: EmulatedBox, path: Path) -> None:
    try:
        box.restore(json.loads(path.read_text(encoding="utf-8")))
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise UsageError(
            f"{path} does not keep this emulated box ({error}).",
            remedy="Name the state file of the same scenario and seed, or a new file.",
        ) from None
