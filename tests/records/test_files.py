"""Files that are none, files that may not be written, disks that are full."""

from __future__ import annotations

import os
import sqlite3
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

import pytest
from tests.records.contents import OUTCOME, ROWS, begin, rows, whole

from dwellbench.errors import StoreError
from dwellbench.records import Store

POSIX = pytest.mark.skipif(not hasattr(os, "geteuid"), reason="POSIX")


def changed(path: Path, *statements: str) -> Path:
    """Change a database by hand."""
    raw = sqlite3.connect(path, isolation_level=None)
    for statement in statements:
        raw.execute(statement)
    raw.close()
    return path


def foreign(path: Path) -> Path:
    """Another program's database."""
    return changed(path, "CREATE TABLE theirs (x)")


def only_marked(path: Path) -> Path:
    """One that has no table yet, but says whose it is."""
    return changed(path, "PRAGMA application_id = 77")


def text(path: Path) -> Path:
    """No database."""
    path.write_text("not a database at all, " * 200)
    return path


def newer(path: Path) -> Path:
    """Ours, of a version to come."""
    Store(path).close()
    return changed(path, "PRAGMA user_version = 99")


def short(path: Path) -> Path:
    """A few bytes that are no head of a database."""
    path.write_bytes(b"SQLite format")
    return path


def folder(path: Path) -> Path:
    """A folder."""
    path.mkdir()
    return path


def pipe(path: Path) -> Path:
    """Opening it as a file would wait for ever."""
    os.mkfifo(path)
    return path


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (folder, "is a folder"),
        (foreign, "belongs to another program"),
        (only_marked, "belongs to another program"),
        (text, "is not a records file"),
        (short, "is not a records file"),
        (newer, "newer dwellbench"),
        pytest.param(pipe, "is a device or a pipe", marks=POSIX),
    ],
)
def test_files_that_are_none_are_refused_and_left_alone(tmp_path: Path, make: object, words: str) -> None:
    path = make(tmp_path / "r.db")  # type: ignore[operator]
    before = path.read_bytes() if path.is_file() else b""
    with pytest.raises(StoreError, match=words) as caught:
        Store(path)
    assert (caught.value.exit, caught.value.kind) == (8, "store")
    assert caught.value.remedy and caught.value.details["cause"]
    assert str(path) in caught.value.message
    assert (path.read_bytes() if path.is_file() else b"") == before


def test_a_device_is_refused() -> None:
    with pytest.raises(StoreError, match="device"):
        Store(os.devnull)


def test_an_empty_file_becomes_one(tmp_path: Path) -> None:
    (tmp_path / "r.db").touch()
    with Store(tmp_path / "r.db") as store:
        whole(store)


@pytest.mark.parametrize(
    "name", [":memory:", "file:x?mode=memory", "a b#c?d%41.db", "\u00fcml\u00e4ut \U0001f600.db", "-x.db"]
)
def test_a_name_is_a_name(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str) -> None:
    monkeypatch.chdir(tmp_path)
    with Store(name) as store:
        whole(store)
        store.backup(f"{name}.copy")
    assert (tmp_path / name).is_file()
    with Store(f"{name}.copy") as store:
        assert store.samples(1).tolist() == ROWS


def test_folders_are_made_and_one_that_cannot_be_says_so(tmp_path: Path) -> None:
    Store(tmp_path / "a" / "b" / "r.db").close()
    with pytest.raises(StoreError, match="cannot be made"):
        Store(tmp_path / "a" / "b" / "r.db" / "r.db")


@contextmanager
def unprivileged() -> Iterator[Path]:
    """A folder that one may only read, seen by someone to whom its rights apply (they do not to root)."""
    with tempfile.TemporaryDirectory() as name:
        place = Path(name)
        place.chmod(0o755)
        yield place
        place.chmod(0o755)


@contextmanager
def as_nobody() -> Iterator[None]:
    """Inside, file rights count."""
    root = os.geteuid() == 0
    if root:
        os.seteuid(65534)
    try:
        yield
    finally:
        if root:
            os.seteuid(0)


@POSIX
@pytest.mark.parametrize("log", ["no log", "a log beside it"])
def test_a_file_that_may_only_be_read_is_read(log: str) -> None:
    with unprivileged() as place:
        store = Store(place / "r.db")
        whole(store)
        if log == "no log":
            store.close()
            (place / "r.db").chmod(0o444)
            place.chmod(0o555)
        else:
            for path in place.iterdir():
                path.chmod(0o444)
            place.chmod(0o555)
        with as_nobody(), Store(place / "r.db") as reader:
            assert not reader.writable
            assert reader.samples(1).tolist() == ROWS
            assert reader.record(1)["outcomes"][0]["verdict"] == "fit"
            assert (reader.unfinished(), reader.check()) == ([], [])
            for attempt in (lambda: begin(reader), lambda: reader.add_note(1, "x")):
                with pytest.raises(StoreError, match="can be read but not written") as caught:
                    attempt()
                assert caught.value.details["cause"] == "read_only"
        store.close()


@POSIX
def test_a_file_that_may_not_even_be_read_says_so() -> None:
    with unprivileged() as place:
        Store(place / "r.db").close()
        (place / "r.db").chmod(0)
        with as_nobody(), pytest.raises(StoreError, match="cannot be opened"):
            Store(place / "r.db")
        with suppress(StoreError):
            Store(place / "r.db").close()


@POSIX
def test_a_new_file_where_none_may_be_made_says_so() -> None:
    with unprivileged() as place:
        place.chmod(0o555)
        with as_nobody(), pytest.raises(StoreError, match="cannot be opened"):
            Store(place / "r.db")


def test_a_full_disk_loses_nothing_that_was_taken(tmp_path: Path) -> None:
    """SQLite's own bound on the file stands for the disk's: the same error from the same place in it."""
    with Store(tmp_path / "r.db") as store:
        writer = begin(store)
        pages = store._connection.execute("PRAGMA page_count").fetchone()[0]
        store._connection.execute(f"PRAGMA max_page_count = {pages + 2}")
        given = [[n, (n + 1) * 100, *[(n * 7919**k) % 2**29 for k in range(1, 17)]] for n in range(600)]
        with pytest.raises(StoreError, match="disk is full") as caught:
            writer.rows(given)
        assert "Make room" in caught.value.remedy
        kept = len(store.samples(1))
        store._connection.execute("PRAGMA max_page_count = 1000000")
        writer.end("complete", None, OUTCOME)
        after = store.samples(1).tolist()
        assert len(after) == kept + 10  # what the failed call had taken before it failed
        assert after == given[: len(after)]
        assert store.check() == []


def test_a_disk_that_refuses_says_so(tmp_path: Path) -> None:
    """The system's own bound on the size of a file: writing beyond it fails in the kernel."""
    resource = pytest.importorskip("resource")
    with Store(tmp_path / "r.db") as store:
        writer = begin(store)
        writer.rows(ROWS)
        size = max(path.stat().st_size for path in tmp_path.iterdir())
        before = resource.getrlimit(resource.RLIMIT_FSIZE)
        resource.setrlimit(resource.RLIMIT_FSIZE, (size, before[1]))
        try:
            with pytest.raises(StoreError, match=r"disk refuses|disk is full"):
                writer.rows(rows(2000))
        finally:
            resource.setrlimit(resource.RLIMIT_FSIZE, before)
        writer.end("complete", None, OUTCOME)
        assert store.samples(1).tolist()[: len(ROWS)] == ROWS
        assert store.check() == []


def test_a_closed_store_says_so(tmp_path: Path) -> None:
    store = Store(tmp_path / "r.db")
    store.close()
    store.close()
    with pytest.raises(StoreError, match="cannot be used"):
        store.records()


def test_a_backup_is_whole_while_a_run_is_written_and_never_replaces_a_file(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store)
        writer = begin(store)
        writer.rows(ROWS[:40])
        store.backup(tmp_path / "copy.db")
        writer.rows(ROWS[40:])
        writer.end("complete", None, OUTCOME)
        with pytest.raises(StoreError, match="there already"):
            store.backup(tmp_path / "copy.db")
        with pytest.raises(StoreError, match="cannot be"):
            store.backup(tmp_path / "none" / "copy.db")
    assert sorted(path.name for path in tmp_path.iterdir() if "lock" not in path.name) == ["copy.db", "r.db"]
    assert (tmp_path / "copy.db").read_bytes()[
        18:20
    ] == b"\1\1"  # needs no log: can lie where nothing may be written
    with Store(tmp_path / "copy.db") as copy:
        assert [one.state for one in copy.unfinished()] == ["interrupted"]
        assert copy.samples(1).tolist() == ROWS
        assert copy.samples(2).tolist() == ROWS[:40]
        assert copy.check() == []
