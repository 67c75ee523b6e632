"""The store: runs as they are written and found again, notes and outcomes that come later."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from tests.records.contents import BOX, OTHER_BOX, OUTCOME, ROWS, begin, rows, whole

from dwellbench.errors import StoreError, UsageError
from dwellbench.records import Store


def test_what_is_written_is_found(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        writer = begin(store, label="L1", started_utc="2026-01-05T10:00:00Z")
        writer.rows(ROWS[:30])
        writer.event("state", {"state": "dwell"})
        writer.rows(ROWS[30:])
        assert writer.end("complete", None, OUTCOME) == 1
    with Store(tmp_path / "r.db") as store:
        assert store.samples("R1").tolist() == ROWS
        record = store.record("r001")
        assert record["outcomes"][0]["reason"] == "because"
        assert record["events"] == [{"kind": "state", "state": "dwell"}]
        assert (record["state"], record["end"], record["sample_count"]) == ("ended", "complete", len(ROWS))
        assert (record["part"], record["plan"]) == ({"marking": "47n 630V film"}, {"volts_V": 630.0})
        assert record["started_utc"] == "2026-01-05T10:00:00Z"
        assert store.calibrations(BOX)[0]["id"] == "abc"
        assert store.check() == []


def test_events_stay_in_the_order_they_came(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        writer = begin(store)
        for t in (9, 30, 4, 200, 1, *range(1000, 1012)):
            writer.event("log", {"t": t})
        writer.end("complete", None, OUTCOME)
        assert [one["t"] for one in store.record(1)["events"]] == [9, 30, 4, 200, 1, *range(1000, 1012)]


def test_samples_of_a_closed_run_are_in_one_piece(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store)
        assert store._connection.execute("SELECT count(*) FROM sample_batch").fetchone()[0] == 0
        (packed,) = store._connection.execute("SELECT samples FROM trace").fetchone()
    assert len(packed) < 18 * len(ROWS)  # a byte a number, of four


def test_a_full_second_is_in_the_file_when_the_call_returns(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store, Store(tmp_path / "r.db") as reader:
        writer = begin(store)
        for count, row in enumerate(ROWS, start=1):
            writer.rows([row])
            assert len(reader.samples(1)) == count - count % 10
        writer.event("fault", {"fault": "stop"})
        assert len(reader.samples(1)) == len(ROWS)


def test_rows_of_a_thinned_run_do_not_wait_for_ten_of_them(tmp_path: Path) -> None:
    """A run that forms for hours keeps a row an interval: each is more than a second of data by itself."""
    with Store(tmp_path / "r.db") as store, Store(tmp_path / "r.db") as reader:
        writer = begin(store)
        for count in range(1, 4):
            writer.rows([[count, count * 60_000, *ROWS[0][2:]]])
            assert len(reader.samples(1)) == count


def test_a_call_with_many_rows_is_written_a_second_at_a_time(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        begin(store).rows(ROWS)
        batches = store._connection.execute("SELECT count(*) FROM sample_batch").fetchone()[0]
    assert batches == len(ROWS) // 10


@pytest.mark.parametrize("state", ["ended", "interrupted"])
def test_a_run_is_closed_once(tmp_path: Path, state: str) -> None:
    with Store(tmp_path / "r.db") as store:
        writer = begin(store)
        if state == "ended":
            writer.end("complete", None, OUTCOME)
        else:
            writer.interrupted("stopped by the user")
        writer.interrupted("again")
        record = store.record(1)
    assert record["state"] == state
    assert record["why"] == (None if state == "ended" else "stopped by the user")


def test_a_run_left_open_when_the_store_is_closed_is_interrupted(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        begin(store).rows(ROWS)
    with Store(tmp_path / "r.db") as store:
        assert store.unfinished() == []
        record = store.record(1)
        assert (record["state"], record["why"]) == (
            "interrupted",
            "the records were closed before the run ended",
        )
        assert store.samples(1).tolist() == ROWS


def test_calibrations_are_kept_once_a_version_and_a_box(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        for number in (1, 1, 2, 1):
            whole(store, calibration={"id": number})
        whole(store, OTHER_BOX, calibration={"id": 1})
        for document in (
            {"id": 3, "made": 1},
            {"made": 1, "id": 3},
        ):  # the order of members is no other version
            store.keep_calibration({"box": BOX, "model": "reference"}, document)
        assert [one["id"] for one in store.calibrations(BOX)] == [1, 2, 3]
        assert [one["id"] for one in store.calibrations(OTHER_BOX)] == [1]
        assert [store.record(number)["calibration"]["id"] for number in (1, 2, 3, 4)] == [1, 1, 2, 1]
        whole(store, calibration=None)
        assert store.record("R6")["calibration"] is None


def test_later_outcomes_and_notes_stand_beside_the_first(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store, note="first")
        store.add_outcome("R1", {"verdict": "unfit", "reason": "a stricter grade", "findings": []})
        store.add_note("R1", "second")
        record = store.record("R1")
        assert [one["verdict"] for one in record["outcomes"]] == ["fit", "unfit"]
        assert [one["text"] for one in record["notes"]] == ["first", "second"]
        assert record["note"] == "first"
        assert store.records()[0].verdict == record["verdict"] == "unfit"
        assert store.check() == []


def test_nothing_is_added_to_a_run_that_is_being_written_or_is_not_there(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        writer = begin(store)
        with pytest.raises(StoreError, match="still being written"):
            store.add_note(writer.id, "too early")
        with pytest.raises(UsageError, match="no record R7"):
            store.add_outcome("R7", OUTCOME)
        writer.rows(ROWS[:20])
        writer.end("complete", None, None)
        assert store.check() == []


def test_what_is_no_number_is_kept_as_null(tmp_path: Path) -> None:
    """JSON has no word for it, and other readers of the file would stumble over one that only Python knows."""
    with Store(tmp_path / "r.db") as store:
        writer = begin(store)
        writer.end("complete", None, {**OUTCOME, "leakage_A": {"value": math.nan, "bounds": [0.5, math.inf]}})
        (outcome,) = store.record(1)["outcomes"]
        assert outcome["leakage_A"] == {"value": None, "bounds": [0.5, None]}
        document = store._connection.execute("SELECT document FROM outcome").fetchone()[0]
    assert "NaN" not in document


@pytest.mark.parametrize("text", ["\udcff", "a\0b"])
@pytest.mark.parametrize("what", ["label", "note"])
def test_what_is_no_text_is_refused_before_anything_is_written(tmp_path: Path, what: str, text: str) -> None:
    """A command line of bytes that are no UTF-8 comes to Python with such code points in it."""
    with Store(tmp_path / "r.db") as store:
        with pytest.raises(UsageError, match=what):
            begin(store, **{what: text})
        assert store.records(text=text) == []
        assert store.count() == 0
        whole(store)


def test_beginnings_and_ends_wait_for_the_disk_and_seconds_do_not(tmp_path: Path) -> None:
    """What SQLite was told: FULL before the transaction of a beginning and an end, which a power cut must not undo."""
    told: list[str] = []
    with Store(tmp_path / "r.db") as store:
        store._connection.set_trace_callback(told.append)
        writer = begin(store)
        middle = len(told)
        writer.rows(rows(40))
        last = len(told)
        writer.end("complete", None, OUTCOME)
        store._connection.set_trace_callback(None)
    for part in (told[:middle], told[last:]):
        full, commit = part.index("PRAGMA synchronous = FULL"), part.index("COMMIT")
        assert full < commit < part.index("PRAGMA synchronous = NORMAL")
    assert not any("synchronous" in text for text in told[middle:last])
    assert told[middle:last].count("COMMIT") == 4
