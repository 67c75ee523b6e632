"""Which emulated box an `emu://` URL or the `emulate` command means.

emu://film?seed=7                        a packaged scenario
emu:///path/to/file.toml?seed=7          a file (three slashes)
emu://film?state=box.json                the box lives on in that file (state.py)
emu://film?interpreter=micropython       the firmware under MicroPython
"""

from __future__ import annotations

import urllib.parse
from dataclasses import dataclass, field
from pathlib import Path

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.emulator.state import StateFile, live_on
from dwellbench.errors import UsageError

INTERPRETERS: dict[str, type[EmulatedBox]] = {"cpython": InProcessBox, "micropython": LockstepBox}
_KEYS = {"seed", "state", "interpreter"}
_MOST_SEED = 2**63 - 1


@dataclass
class Opening:
    """What was asked for. `seed` None takes the scenario's."""

    scenario: str
    seed: int | None = None
    state: Path | None = None
    interpreter: str = "cpython"
    _file: StateFile | None = field(default=None, repr=False, compare=False)

    @classmethod
    def from_url(cls, url: str) -> Opening:
        """Read an emu:// URL. UsageError says what is wrong with it."""
        parts = urllib.parse.urlsplit(url)
        if parts.scheme != "emu":
            raise UsageError(f"{url} is not an emu:// URL.", remedy=_SAY)
        query = _query(url, parts.query)
        name = urllib.parse.unquote(parts.netloc + (parts.path if parts.path != "/" else ""))
        state = query.get("state")
        if state == "":
            raise UsageError(f"{url}: the state needs a file.", remedy="Say state=box.json.")
        return cls(
            name or "film",
            _seed(url, query.get("seed")),
            None if state is None else Path(state),
            query.get("interpreter", "cpython"),
        )

    def make(self, time_scale: float | None = None) -> EmulatedBox:
        """Switch the box on, as it was left if it has a state file. UsageError, NoBoxError when that cannot be."""
        if self.interpreter not in INTERPRETERS:
            known = " or ".join(sorted(INTERPRETERS))
            raise UsageError(f"There is no interpreter {self.interpreter!r}.", remedy=f"Say {known}.")
        scenario = Scenario.load(self.scenario)
        box = INTERPRETERS[self.interpreter](scenario, self.seed, time_scale=time_scale)
        if self.state is not None:
            self._take_up(box, StateFile(self.state))
        return box

    def _take_up(self, box: EmulatedBox, file: StateFile) -> None:
        try:
            file.load(box)
        except BaseException:
            file.release()
            raise
        self._file = file
        box.on_keep = lambda: file.save(box)

    def leave(self, box: EmulatedBox) -> None:
        """The host is gone. A box with a state file lives on until it is at rest, and is kept there."""
        file, self._file = self._file, None
        if file is None:
            return
        try:
            live_on(box)
            file.save(box)
        finally:
            box.on_keep = None
            file.release()


_SAY = "Say emu://NAME?seed=N or emu:///path/file.toml."


def _query(url: str, text: str) -> dict[str, str]:
    query = urllib.parse.parse_qs(text, keep_blank_values=True)
    for key, values in query.items():
        if key not in _KEYS:
            raise UsageError(
                f"{url}: the key {key!r} is not known.", remedy=f"Known are: {', '.join(sorted(_KEYS))}."
            )
        if len(values) > 1:
            raise UsageError(f"{url}: {key} is said twice.", remedy="Say it once.")
    return {key: values[0] for key, values in query.items()}


def _seed(url: str, text: str | None) -> int | None:
    if text is None:
        return None
    if text.isascii() and text.isdigit() and int(text) <= _MOST_SEED:
        return int(text)
    raise UsageError(
        f"{url}: the seed must be a whole number from 0 to {_MOST_SEED}, not {text!r}.", remedy="Say seed=7."
    )
