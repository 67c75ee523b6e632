"""The store: runs as they are written, found again, and every file that is not one."""

from __future__ import annotations

import sqlite3
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dwellbench.errors import StoreError, UsageError
from dwellbench.records import RunWriter, Store
from dwellbench.records.database import explained
from dwellbench.records.packing import hash_of, pack, unpack

ROWS = [
    [n, n * 100, 6, 1, 0, 18, 163_000 + n, 9000, 9100, 20, -50 + n, -10, 10, 0, 8000, 16000, 0, 0]
    for n in range(57)
]


def begin(store: Store, box: str = "0" * 16, **changes: Any) -> RunWriter:
    """Begin a run with ordinary contents."""
    contents: dict[str, Any] = {
        "run_key": "key",
        "part": {"marking": "47n 630V film"},
        "role": "coupling",
        "grade": "new",
        "plan": {"volts_V": 630.0},
        "box": {"box": box, "model": "reference", "firmware": "0.1.0", "build": "00000000"},
        "calibration": {"id": "abc"},
        "simulated": True,
    }
    return store.begin_run(**{**contents, **changes})


def test_what_is_written_is_found(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        writer = begin(store, label="L1")
        writer.rows(ROWS[:30])
        writer.event("state", {"state": "dwell"})
        writer.rows(ROWS[30:])
        assert writer.end("complete", None, {"verdict": "fit", "reason": "because"}) == 1
        assert store.samples("R1").tolist() == ROWS
        record = store.record("r001")
        assert record["outcomes"][0]["reason"] == "because"
        assert record["events"] == [{"kind": "state", "state": "dwell"}]
        assert [one.name for one in store.records(verdict="fit", label="L1")] == ["R1"]
        assert store.records(verdict="unfit") == []
        assert store.calibrations("0" * 16)[0]["id"] == "abc"
    with sqlite3.connect(tmp_path / "r.db") as raw:
        assert raw.execute("SELECT count(*) FROM sample_batch").fetchone()[0] == 0
    raw.close()


@pytest.mark.parametrize(
    "text",
    [
        "a/b\\c",
        "\U0001f600 emoji",
        "'; DROP TABLE run; --",
        '"quotes"',
        "\u05e9\u05dc\u05d5\u05dd",
        "x" * 10_000,
        "50%_off",
    ],
)
def test_any_label_and_note_is_kept_and_found(tmp_path: Path, text: str) -> None:
    with Store(tmp_path / "r.db") as store:
        begin(store, label=text, note=text).end("complete", None, None)
        begin(store, label="other").end("complete", None, None)
        assert store.record(1)["label"] == store.record(1)["note"] == text
        assert [one.id for one in store.records(text=text[:40])] == [1]
        assert store.count(label=text) == 1


def test_calibrations_are_kept_once_a_version(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        for number in (1, 1, 2):
            begin(store, calibration={"id": number}).end("complete", None, None)
        assert [one["id"] for one in store.calibrations("0" * 16)] == [1, 2]


def test_the_same_box_may_not_be_driven_twice_but_two_boxes_may(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as one, Store(tmp_path / "r.db") as two:
        first = begin(one)
        with pytest.raises(StoreError, match="driving this box"):
            begin(two)
        other = begin(two, box="1" * 16)
        first.rows(ROWS)
        other.rows(ROWS)
        first.end("complete", None, None)
        begin(two).end("complete", None, None)
        other.end("complete", None, None)
        assert one.count() == 3


def test_a_run_that_is_being_written_is_not_taken_for_left_behind(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as one, Store(tmp_path / "r.db") as two:
        writer = begin(one)
        assert two.unfinished() == []
        writer.end("complete", None, None)


_WRITER = """
import sys, time
sys.path[:0] = sys.argv[2].split("|")
from tests.records.test_store import ROWS, begin
from dwellbench.records import Store
with Store(sys.argv[1]) as store:
    writer = begin(store)
    n = 0
    while True:
        writer.rows([[n + k, *ROWS[0][1:]] for k in range(10)])
        n += 10
        print(n, flush=True)
"""


@pytest.mark.parametrize("after", [1, 2, 3, 5, 8, 13, 21, 34])
def test_a_killed_writer_loses_no_batch_that_was_written(tmp_path: Path, after: int) -> None:
    database = tmp_path / "r.db"
    command = [sys.executable, "-c", _WRITER, str(database), "|".join(sys.path)]
    with subprocess.Popen(
        command, stdout=subprocess.PIPE, text=True, cwd=Path(__file__).parents[2]
    ) as process:
        assert process.stdout is not None
        said = 0
        for _ in range(after):
            said = int(process.stdout.readline())
        process.kill()
        process.wait()
    with Store(database) as store:
        (left,) = store.unfinished()
        assert (left.state, store.record(left.id)["why"] is not None) == ("interrupted", True)
        rows = store.samples(left.id)
        assert len(rows) >= said
        assert rows[:, 0].tolist() == list(range(len(rows)))


def test_files_that_are_none(tmp_path: Path) -> None:
    foreign = tmp_path / "foreign.db"
    with sqlite3.connect(foreign) as raw:
        raw.execute("CREATE TABLE theirs (x)")
    raw.close()
    text = tmp_path / "text.db"
    text.write_text("not a database at all, " * 200)
    newer = tmp_path / "newer.db"
    Store(newer).close()
    with sqlite3.connect(newer) as raw:
        raw.execute("PRAGMA user_version = 99")
    raw.close()
    for path, words in (
        (tmp_path, "folder"),
        (foreign, "another program"),
        (text, "not a records file"),
        (newer, "newer dwellbench"),
    ):
        with pytest.raises(StoreError, match=words) as caught:
            Store(path)
        assert caught.value.exit == 8
        assert caught.value.remedy
    assert text.read_text().startswith("not a database")


def test_a_file_that_cannot_be_written_says_so(tmp_path: Path) -> None:
    """SQLite's own error, from a connection opened read-only: as root no file mode would provoke it."""
    path = tmp_path / "r.db"
    Store(path).close()
    raw = sqlite3.connect(f"file:{path}?mode=ro", uri=True)
    try:
        with pytest.raises(StoreError, match="cannot be written") as caught, explained(path):
            raw.execute("CREATE TABLE more (x)")
        assert "--records" in caught.value.remedy
    finally:
        raw.close()


def test_a_folder_that_cannot_be_made_says_so(tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    with pytest.raises(StoreError, match="cannot be made"):
        Store(tmp_path / "file" / "r.db")


def test_damaged_samples_are_named(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        writer = begin(store)
        writer.rows(ROWS)
        writer.end("complete", None, {"verdict": "fit"})
    with sqlite3.connect(tmp_path / "r.db") as raw:
        data = bytearray(raw.execute("SELECT samples FROM run").fetchone()[0])
        raw.execute("UPDATE run SET samples = ?", (pack(np.array(ROWS) + 1),))
    raw.close()
    with Store(tmp_path / "r.db") as store:
        with pytest.raises(StoreError, match="R1 are damaged"):
            store.samples("R1")
        assert store.record("R1")["outcomes"][0]["verdict"] == "fit"
    assert data


@pytest.mark.parametrize("name", ["", "17x", "R", "-1", "R1.5"])
def test_names_that_are_none(tmp_path: Path, name: str) -> None:
    with Store(tmp_path / "r.db") as store, pytest.raises(UsageError):
        store.record(name)


@given(st.lists(st.lists(st.integers(-(2**30) + 1, 2**30 - 1), min_size=18, max_size=18), max_size=30))
def test_rows_are_packed_without_loss(rows: list[list[int]]) -> None:
    assert unpack(pack(rows)).tolist() == rows
    assert hash_of(unpack(pack(rows))) == hash_of(rows)
