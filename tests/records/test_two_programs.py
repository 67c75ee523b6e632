"""Two programs at one file: the same box once, two boxes at once, and one that keeps the file to itself."""

from __future__ import annotations

import os
import sqlite3
import subprocess
import sys
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path

import pytest
from tests.records.contents import OTHER_BOX, OUTCOME, ROWS, begin, rows, whole

from dwellbench.errors import StoreError
from dwellbench.records import Store
from dwellbench.records.writer import MOST_REFUSALS

ROOT = Path(__file__).parents[2]

_HOLDER = """
import sys
from tests.records.contents import ROWS, begin
from dwellbench.records import Store
with Store(sys.argv[1]) as store:
    writer = begin(store, label="theirs")
    writer.rows(ROWS[:20])
    print("began", flush=True)
    sys.stdin.readline()
    writer.rows(ROWS[20:])
    writer.end("complete", None, {"verdict": "fit"})
"""


@contextmanager
def another_program(path: Path) -> Iterator[subprocess.Popen[str]]:
    """A process in the middle of a run of the first box, until it is given a line."""
    command = [sys.executable, "-c", _HOLDER, str(path)]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    with subprocess.Popen(
        command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, cwd=ROOT, env=environment
    ) as process:
        assert process.stdout is not None and process.stdout.readline() == "began\n"
        try:
            yield process
        finally:
            process.kill()


@contextmanager
def kept_busy(path: Path) -> Iterator[sqlite3.Connection]:
    """A program that has the file's write lock."""
    other = sqlite3.connect(path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    try:
        yield other
    finally:
        other.close()


def test_another_program_has_the_box(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    with another_program(path) as other, Store(path) as store:
        assert store.unfinished() == []
        with pytest.raises(StoreError, match="driving this box") as caught:
            begin(store)
        assert caught.value.details["cause"] == "box_taken"
        mine = whole(store, OTHER_BOX)
        assert [one.state for one in store.records()] == ["ended", "open"]
        other.communicate("go on\n")
        assert other.returncode == 0
        assert store.samples(1).tolist() == store.samples(mine).tolist() == ROWS
        assert whole(store) == 3
        assert store.check() == []


def test_a_box_is_free_when_its_program_is_killed(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    with another_program(path) as other, Store(path) as store:
        other.kill()
        other.wait()
        assert whole(store) == 2  # beginning a run closes what was left open for its box
        assert store.unfinished() == []
        assert (store.records()[1].state, len(store.samples(1))) == ("interrupted", 20)


def test_the_same_box_may_not_be_driven_twice_but_two_boxes_may(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as one, Store(tmp_path / "r.db") as two:
        first = begin(one)
        for store in (one, two):
            with pytest.raises(StoreError, match="driving this box"):
                begin(store)
        other = begin(two, OTHER_BOX)
        for row in ROWS:
            first.rows([row])
            other.rows([row])
        first.end("complete", None, OUTCOME)
        whole(two)
        other.end("complete", None, OUTCOME)
        assert one.count() == 3
        assert [one.samples(number).tolist() for number in (1, 2, 3)] == [ROWS] * 3


def test_a_link_to_the_file_is_the_same_file(tmp_path: Path) -> None:
    Store(tmp_path / "r.db").close()
    try:
        (tmp_path / "link.db").symlink_to(tmp_path / "r.db")
    except OSError:
        pytest.skip("no links here")
    with Store(tmp_path / "r.db") as one, Store(tmp_path / "link.db") as two:
        writer = begin(one)
        assert two.unfinished() == []
        with pytest.raises(StoreError, match="driving this box"):
            begin(two)
        writer.end("complete", None, OUTCOME)


def test_a_failed_beginning_lets_the_box_go(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    with Store(path, wait_s=0.02) as store:
        with kept_busy(path), pytest.raises(StoreError, match="being written by another program") as caught:
            begin(store)
        assert caught.value.details["cause"] == "locked"
        assert caught.value.exit == 8
        whole(store)


def test_a_file_kept_busy_for_a_while_costs_a_run_nothing(tmp_path: Path) -> None:
    """A host that waited would be silent on the link, and the box would end the run."""
    path = tmp_path / "r.db"
    with Store(path) as store:
        writer = begin(store)
        writer.rows(ROWS[:20])
        with kept_busy(path):
            writer.rows(ROWS[20:30])
            writer.event("log", {"text": "in between"})
            writer.rows(ROWS[30:40])
            assert len(store.samples(1)) == 20
        writer.rows(ROWS[40:50])
        assert len(store.samples(1)) == 50
        writer.rows(ROWS[50:])
        writer.end("complete", None, OUTCOME)
        assert store.samples(1).tolist() == ROWS
        assert store.record(1)["events"] == [{"kind": "log", "text": "in between"}]


def test_a_file_kept_busy_for_ever_is_an_error_and_what_was_held_is_written_later(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("dwellbench.records.writer.SHORT_WAIT_S", 0.0)
    path = tmp_path / "r.db"
    with Store(path, wait_s=0.02) as store:
        writer = begin(store)
        given = rows(10 * MOST_REFUSALS)
        with kept_busy(path):
            writer.rows(given[:-10])
            with pytest.raises(StoreError, match="being written by another program"):
                writer.rows(given[-10:])
            with pytest.raises(StoreError, match="being written by another program"):
                writer.end("complete", None, OUTCOME)
            assert writer.open
        writer.end("complete", None, OUTCOME)
        assert store.samples(1).tolist() == given


def test_a_run_waits_less_for_another_program_than_the_box_waits_for_its_host(tmp_path: Path) -> None:
    """The box ends a run after 2 s of silence. What SQLite was told before each write in mid-run, and after it."""
    told: list[str] = []
    with Store(tmp_path / "r.db", wait_s=4.0) as store:
        writer = begin(store)
        store._connection.set_trace_callback(told.append)
        writer.rows(ROWS[:10])
        store._connection.set_trace_callback(None)
    waits = [int(text.split()[-1]) for text in told if "busy_timeout" in text]
    assert len(waits) == 2 and waits[0] <= 200 and waits[1] == 4000
    assert "busy_timeout" in told[0] and "busy_timeout" in told[-1]


def test_a_store_that_cannot_close_its_run_lets_the_box_go(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    store = Store(path, wait_s=0.02)
    writer = begin(store)
    writer.rows(ROWS[:20])
    with kept_busy(path), pytest.raises(StoreError, match="being written by another program"):
        store.close()
    with Store(path) as again:
        assert [one.id for one in again.unfinished()] == [1]
        assert whole(again) == 2
    assert writer.open


def test_an_error_in_the_middle_is_not_hidden_by_one_at_the_end(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    busy = ExitStack()
    with busy, pytest.raises(KeyError), Store(path, wait_s=0.02) as store:
        begin(store)
        busy.enter_context(kept_busy(path))
        raise KeyError("what went wrong first")


def test_opening_a_busy_file_waits_only_so_long(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    with kept_busy(path), pytest.raises(StoreError, match="being written by another program"):
        Store(path, wait_s=0.02)
    with Store(path) as store:
        whole(store)
        with kept_busy(path), Store(path, wait_s=0.02) as reader:
            assert reader.samples(1).tolist() == ROWS  # looking needs no turn
