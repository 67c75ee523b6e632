"""Killed, torn off, cut short: what was written is there."""

from __future__ import annotations

import os
import random
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from tests.records.contents import ROWS, begin, rows, whole

from dwellbench.records import Store

ROOT = Path(__file__).parents[2]


def environment() -> dict[str, str]:
    """For a process of its own: the same search path, and no threads that a fork would not take along."""
    return {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "OPENBLAS_NUM_THREADS": "1"}


@pytest.mark.skipif(not hasattr(os, "fork"), reason="needs fork")
@pytest.mark.parametrize("old", [[], ["--old"]], ids=["new file", "file of version 1"])
def test_killed_at_random_steps_of_sqlite(old: list[str]) -> None:
    """More of them: python -m tests.records.killing 5000 1."""
    count = os.environ.get("DWELLBENCH_KILLS", "60")
    command = [sys.executable, "-m", "tests.records.killing", count, "20260105", *old]
    done = subprocess.run(
        command, cwd=ROOT, env=environment(), capture_output=True, text=True, timeout=500, check=False
    )
    assert done.returncode == 0, done.stderr
    assert {"'rows'", "'event'", "'nothing'"} <= set(done.stdout.replace("{", "").replace(":", "").split())


_WRITER = """
import sys
from tests.records.contents import ROWS, begin
from dwellbench.records import Store
with Store(sys.argv[1]) as store:
    writer = begin(store)
    n = 0
    while True:
        writer.rows([[n + k, (n + k + 1) * 100, *ROWS[0][2:]] for k in range(10)])
        n += 10
        print(n, flush=True)
"""


@pytest.mark.parametrize("after", [1, 8, 34])
def test_killed_from_outside(tmp_path: Path, after: int) -> None:
    """The signal falls where it falls: into Python, into SQLite or into the kernel."""
    command = [sys.executable, "-c", _WRITER, str(tmp_path / "r.db")]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True, cwd=ROOT, env=environment()) as process:
        assert process.stdout is not None
        said = 0
        for _ in range(after):
            said = int(process.stdout.readline())
        process.kill()
        process.wait()
    with Store(tmp_path / "r.db") as store:
        (left,) = store.unfinished()
        assert (left.state, store.record(left.id)["why"] is not None) == ("interrupted", True)
        kept = store.samples(left.id)
        assert len(kept) >= said
        assert kept[:, 0].tolist() == list(range(len(kept)))
        assert store.unfinished() == []


@pytest.mark.parametrize("what", ["cut", "scribbled"])
def test_a_log_that_is_not_whole_gives_what_was_whole_in_it(tmp_path: Path, what: str) -> None:
    """A power cut leaves a log that ends anywhere, or in rubbish: copies of a living file, their log spoiled from a point on."""
    dice = random.Random(7)
    with Store(tmp_path / "r.db") as store:
        whole(store, label="ended")
        store._connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
        writer = begin(store, label="open")
        given = rows(200)
        writer.rows(given)
        log = (tmp_path / "r.db-wal").read_bytes()
        lengths = set()
        for number in range(40):
            at = dice.randrange(len(log))
            copy = tmp_path / f"copy{number}.db"
            shutil.copy(tmp_path / "r.db", copy)
            rest = b"" if what == "cut" else dice.randbytes(min(300, len(log) - at)) + log[at + 300 :]
            Path(f"{copy}-wal").write_bytes(log[:at] + rest)
            lengths.add(_what_is_left(copy, given))
    assert len(lengths) > 5, "the cuts fell into a few places only"


def _what_is_left(path: Path, given: list[list[int]]) -> int:
    with Store(path) as store:
        assert len(store.unfinished()) <= 1
        assert store.check() == []
        assert store.samples(1).tolist() == ROWS
        if store.count() == 1:
            return -1
        kept = store.samples(2).tolist()
        assert kept == given[: len(kept)]
        return len(kept)


def test_a_run_left_open_with_a_damaged_second_is_closed_all_the_same(tmp_path: Path) -> None:
    """Otherwise a file that was damaged once could never be opened by the commands again."""
    source = tmp_path / "r.db"
    with Store(source) as store:
        begin(store).rows(rows(100))
        store._connection.execute("UPDATE sample_batch SET samples = x'00112233' WHERE number = 4")
        store._connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
        shutil.copy(source, tmp_path / "copy.db")
    with Store(tmp_path / "copy.db") as store:
        (left,) = store.unfinished()
        assert [row[0] for row in store.samples(left.id).tolist()] == [*range(40), *range(50, 100)]
        assert "1 second(s) of its samples are damaged" in store.record(left.id)["why"]
        assert [one.record for one in store.check()] == ["R1"]
        assert store.unfinished() == []
