"""A writing process killed in the middle of anything it does to the file, and what must be true afterwards.

SQLite calls back after every step of its own machine; the writer kills itself (SIGKILL) at one of them, drawn from all there are
between opening a file and the end of the second run. So the moments lie inside transactions, migrations and the packing of a run
as well as between them, and a seed gives the same ones again.

python -m tests.records.killing COUNT SEED [--old]     --old: begins with a file of version 1, so that migration is killed too
"""

from __future__ import annotations

import os
import random
import shutil
import signal
import sqlite3
import sys
from collections.abc import Callable
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

from tests.records.contents import OLD_ROWS, OUTCOME, begin, rows, version_1

from dwellbench.records import Store

ROWS_OF_RUN = (143, 57)
OLD_RUNS = 3
"""How many runs the file of version 1 has."""

_connect = sqlite3.connect


def write(path: Path, say: Callable[[str], None], seed: int) -> None:
    """Two runs, in pieces of any size; each step is said when its call has returned."""
    dice = random.Random(seed)
    with Store(path) as store:
        say("opened")
        for number, count in enumerate(ROWS_OF_RUN):
            writer = begin(store, label=f"L{number}", note="a note", calibration={"id": number})
            say("begun")
            given, at = rows(count, number), 0
            while at < count:
                piece = dice.randint(1, 14)
                writer.rows(given[at : at + piece])
                at += piece
                say(f"rows {min(at, count)}")
                if dice.random() < 0.2:
                    writer.event("log", {"t": at, "text": "so far"})
                    say(f"event {min(at, count)}")
            writer.end("complete", None, OUTCOME)
            say("ended")


def child(path: Path, seed: int, kill_at: int, pipe: int) -> None:
    """In a process of its own: write, and be killed at that step. Says how many steps there were if it was not."""
    steps = 0

    def step() -> int:
        nonlocal steps
        steps += 1
        if steps == kill_at:
            os.kill(os.getpid(), signal.SIGKILL)
        return 0

    def connect(*given: Any, **named: Any) -> sqlite3.Connection:
        connection: sqlite3.Connection = _connect(*given, **named)
        connection.set_progress_handler(step, 1)
        return connection

    def say(text: str) -> None:
        os.write(pipe, f"{text} {steps}\n".encode() if text == "opened" else f"{text}\n".encode())

    sqlite3.connect = connect  # type: ignore[assignment]
    write(path, say, seed)
    say(f"steps {steps}")


def killed(path: Path, seed: int, kill_at: int) -> list[str]:
    """Return what the process said before it was killed."""
    reading, writing = os.pipe()
    process = os.fork()
    if process == 0:
        status = 1
        try:
            os.close(reading)
            child(path, seed, kill_at, writing)
            status = 0
        finally:
            os._exit(status)
    os.close(writing)
    with os.fdopen(reading) as pipe:
        said = pipe.read().splitlines()
    status = os.waitpid(process, 0)[1]
    assert status in (0, signal.SIGKILL), f"the writer failed with {status}"
    return said


def verify(path: Path, said: list[str], before: int) -> None:
    """Everything whose call had returned is there, nothing else is wrong, and the file can be used."""
    with Store(path) as store:
        left = store.unfinished()
        assert store.check() == []
        assert len(left) <= 1 + (before > 0)
        if before:
            assert store.samples("R1").tolist() == OLD_ROWS
            assert len(store.samples("R3")) == 20  # left open by a killed program of version 1
        begun, ended = said.count("begun"), said.count("ended")
        assert begun <= store.count() - before <= begun + 1
        for number in range(store.count() - before):
            _verify_run(store, before + number + 1, number, _of_run(said, number), number < ended)
        again = begin(store)
        again.rows(rows(25))
        again.end("complete", None, OUTCOME)
        assert len(store.samples(again.id)) == 25


def _of_run(said: list[str], number: int) -> list[str]:
    """What was said between this run's beginning and the next one's."""
    starts = [at for at, text in enumerate(said) if text == "begun"] + [len(said)] * 2
    return said[starts[number] : starts[number + 1]] if number < said.count("begun") else []


def _verify_run(store: Store, name: int, number: int, said: list[str], ended: bool) -> None:
    record, kept = store.record(name), store.samples(name).tolist()
    expected = rows(ROWS_OF_RUN[number], number)
    taken = max((int(text.split()[1]) for text in said if text.startswith("rows")), default=0)
    flushed = max((int(text.split()[1]) for text in said if text.startswith("event")), default=0)
    assert kept == expected[: len(kept)]
    assert len(kept) > taken - 10, "more than an unfinished second is lost"
    assert len(kept) >= flushed, "samples before an event are lost"
    assert len(record["events"]) >= sum(text.startswith("event") for text in said)
    assert record["note"] == "a note" and record["calibration"] == {"id": number}
    if record["state"] == "ended":
        assert (len(kept), len(record["outcomes"])) == (len(expected), 1)
    else:
        assert not ended
        assert (record["state"], record["outcomes"]) == ("interrupted", [])
        assert "ended before the run" in record["why"]


def campaign(count: int, seed: int, old: bool) -> dict[str, int]:
    """Kill so many writers; return how far they had come, by the last thing each had said."""
    dice, reached = random.Random(seed), dict[str, int]()
    with TemporaryDirectory() as folder:
        first = Path(folder) / "first.db"
        if old:
            version_1(first)
        whole = _one(Path(folder) / "run", first, old, seed, 0)
        opened, steps = (int(whole[at].split()[1]) for at in (0, -1))
        for number in range(count):  # opening takes most of the steps, so only every third is left to chance
            kill_at = dice.randint(opened if number % 3 else 1, steps)
            said = _one(Path(folder) / "run", first, old, seed + number, kill_at)
            word = said[-1].split()[0] if said else "nothing"
            reached[word] = reached.get(word, 0) + 1
    return reached


def _one(folder: Path, first: Path, old: bool, seed: int, kill_at: int) -> list[str]:
    folder.mkdir()
    if old:
        shutil.copy(first, folder / "r.db")
    said = killed(folder / "r.db", seed, kill_at)
    try:
        verify(folder / "r.db", said, OLD_RUNS if old else 0)
    except BaseException:
        print(f"seed {seed}, killed at step {kill_at}, said {said}", file=sys.stderr)
        raise
    shutil.rmtree(folder)
    return said


if __name__ == "__main__":
    print(campaign(int(sys.argv[1]), int(sys.argv[2]), "--old" in sys.argv))
