"""Older files become newer ones: whole, with a copy first, once."""

from __future__ import annotations

import shutil
import sqlite3
from pathlib import Path

import pytest
from tests.records.contents import OLD_ROWS, OTHER_BOX, version_1, whole

from dwellbench.errors import StoreError
from dwellbench.records import Store
from dwellbench.records.owner import BoxLock
from dwellbench.records.schema import MIGRATIONS, VERSION


def schema(path: Path) -> set[tuple[str, ...]]:
    """Every table's columns and every index, whatever the order they were made in."""
    raw = sqlite3.connect(path)
    tables = [row[0] for row in raw.execute("SELECT name FROM sqlite_master WHERE type = 'table'")]
    found = {
        (table, *map(str, row[1:])) for table in tables for row in raw.execute(f"PRAGMA table_info({table})")
    }
    found |= {("index", row[0]) for row in raw.execute("SELECT name FROM sqlite_master WHERE type = 'index'")}
    raw.close()
    return found


def test_a_file_of_version_1_keeps_everything(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    version_1(path)
    with Store(path) as store:
        assert store.samples("R1").tolist() == OLD_ROWS
        record = store.record("R1")
        assert record["note"] == "0.1\u00b5F, from the \u201cgrey\u201d set"
        assert (record["label"], record["outcomes"][0]["verdict"]) == ("drawer 3/A", "fit")
        assert (record["started_utc"], record["ended_utc"]) == (
            "2026-01-05T10:00:00Z",
            "2026-01-05T10:02:00Z",
        )
        assert store.record("R2")["why"] == "stopped by the user"
        assert [one.id for one in store.records(text="0.1\u03bcF")] == [1]
        (left,) = store.unfinished()
        assert (left.id, len(store.samples(3)), store.record(3)["events"][0]["fault"]) == (3, 20, "stop")
        assert store.calibrations(OTHER_BOX)[0]["id"] == "def"
        assert store.check() == []
        assert whole(store) == 4


def test_a_migrated_file_is_built_like_a_new_one_and_says_what_was_done(tmp_path: Path) -> None:
    version_1(tmp_path / "old.db")
    for name in ("old.db", "new.db"):
        Store(tmp_path / name).close()
    assert schema(tmp_path / "old.db") == schema(tmp_path / "new.db")
    raw = sqlite3.connect(tmp_path / "old.db")
    assert [row[0] for row in raw.execute("SELECT version FROM migration ORDER BY version")] == [1, 2]
    assert raw.execute("PRAGMA user_version").fetchone()[0] == VERSION == len(MIGRATIONS)
    raw.close()


def test_a_copy_is_made_first_and_none_is_overwritten(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    version_1(path)
    shutil.copy(path, tmp_path / "before.db")
    taken = tmp_path / "r.db.version-1.copy"
    taken.write_text("an earlier one")
    Store(path).close()
    Store(path).close()
    assert taken.read_text() == "an earlier one"
    (copy,) = tmp_path.glob("r.db.version-1.copy-*")
    contents = []
    for name in (copy, tmp_path / "before.db"):
        raw = sqlite3.connect(name)
        contents.append(list(raw.iterdump()))
        raw.close()
    assert contents[0] == contents[1]


def test_a_migration_that_fails_changes_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "r.db"
    version_1(path)
    before = schema(path)
    broken = (*MIGRATIONS, ("breaks", "CREATE TABLE more (x); INSERT INTO nowhere VALUES (1)", None))
    with monkeypatch.context() as patch:
        patch.setattr("dwellbench.records.migrate.MIGRATIONS", broken)
        patch.setattr("dwellbench.records.migrate.VERSION", VERSION + 1)
        with pytest.raises(StoreError):
            Store(path)
    assert schema(path) == before
    with Store(path) as store:
        assert store.samples(1).tolist() == OLD_ROWS


def test_a_file_into_which_an_older_program_writes_a_run_is_left_alone(tmp_path: Path) -> None:
    path = tmp_path / "r.db"
    version_1(path)
    before = schema(path)
    lock = BoxLock(path, OTHER_BOX)
    lock.take()
    with pytest.raises(StoreError, match="older dwellbench is writing a run"):
        Store(path)
    assert schema(path) == before
    lock.release()
    Store(path).close()


def test_a_file_made_newer_by_another_program_is_not_written_any_more(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        raw = sqlite3.connect(tmp_path / "r.db", isolation_level=None)
        raw.execute("PRAGMA user_version = 99")
        raw.close()
        with pytest.raises(StoreError, match="newer meanwhile"):
            whole(store)
