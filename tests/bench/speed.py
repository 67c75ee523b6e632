"""How fast virtual time goes: a whole run through firmware, wire and host, in both interpreters, and where it goes.

python -m tests.bench.speed
"""

from __future__ import annotations

import time
from pathlib import Path
from tempfile import TemporaryDirectory

from dwellbench.bench import open_box
from dwellbench.emulator.opening import Opening
from dwellbench.records import Store


def whole(interpreter: str) -> tuple[float, float]:
    """A run of a 47 nF part, 60 s dwell, judged and recorded: (virtual seconds, wall seconds), start-up left out."""
    url = f"emu://film?seed=3&interpreter={interpreter}"
    with TemporaryDirectory() as folder, Store(Path(folder) / "r.db") as store, open_box(url) as box:
        box.settle()
        virtual, wall = box.clock(), time.perf_counter()
        box.test("47n 630V film", "coupling", store)
        return box.clock() - virtual, time.perf_counter() - wall


def firmware_and_world(interpreter: str, seconds: float = 60.0) -> tuple[float, float]:
    """The same at rest without a host: what firmware and world cost alone."""
    box = Opening("film", 3, None, interpreter).make()
    for _ in range(8000):
        box.tick()
    begin = time.perf_counter()
    for _ in range(round(seconds * 200)):
        box.tick()
    wall = time.perf_counter() - begin
    box.stop()
    return seconds, wall


def main() -> None:
    """Print times real time."""
    for interpreter, aim in (("cpython", 200), ("micropython", 60)):
        virtual, wall = whole(interpreter)
        bare_virtual, bare_wall = firmware_and_world(interpreter)
        print(
            f"{interpreter:12} whole run {virtual:6.1f} s in {wall:5.2f} s: {virtual / wall:5.0f} x real time (aim {aim});"
            f" at rest without a host {bare_virtual / bare_wall:5.0f} x"
        )


if __name__ == "__main__":
    main()
