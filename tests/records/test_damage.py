"""Damage is found, named, and never shown as if it were a result."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import pytest
from tests.records.contents import BOX, OUTCOME, begin, rows

from dwellbench.errors import StoreError
from dwellbench.records import Store
from dwellbench.records.packing import pack

LONG = [[n, (n + 1) * 100, *[(n * 7919**k) % 2**15 for k in range(1, 17)]] for n in range(90)]
"""Rows that do not pack well, so that much of a small file is samples."""


def filled(path: Path) -> bytes:
    """A file with some records; return its bytes."""
    with Store(path) as store:
        for number in range(8):
            writer = begin(
                store,
                label=f"L{number}",
                note="a note " * 50,
                calibration={"id": number, "volts": [1.5] * 99},
            )
            writer.rows(LONG)
            for t in range(20):
                writer.event("log", {"n": t, "t": t, "boot": 1, "text": "what the box had to say of itself"})
            writer.end("complete", None, {**OUTCOME, "reason": "because of its leakage " * 40})
        store.add_outcome(2, {**OUTCOME, "verdict": "unfit"})
    return path.read_bytes()


SPOILED = [
    ("UPDATE trace SET samples = ? WHERE run = 2", (pack(rows(57, 1)),), "samples are not"),
    ("UPDATE trace SET samples = x'00' WHERE run = 2", (), "samples are not"),
    ("UPDATE trace SET hash = 'x' WHERE run = 2", (), "not what was written"),
    ("DELETE FROM trace WHERE run = 2", (), "not what was written"),
    ('UPDATE outcome SET document = \'{"verdict":"fit"}\' WHERE run = 2', (), "outcome of"),
    ("UPDATE outcome SET document = '{' WHERE run = 2", (), "cannot be read"),
    ("UPDATE outcome SET document = '[]' WHERE run = 2", (), "cannot be read"),
    ("UPDATE note SET document = 'another' WHERE run = 2", (), "note of"),
    ("UPDATE event SET document = '{}' WHERE run = 2", (), "not what was written"),
    ("DELETE FROM event WHERE run = 2", (), "not what was written"),
    ("UPDATE run SET marking = '47n 63V film' WHERE id = 2", (), "not what was written"),
    ("UPDATE run SET simulated = 0 WHERE id = 2", (), "not what was written"),
    ("UPDATE run SET plan = 'x' WHERE id = 2", (), "cannot be read"),
    ("UPDATE run SET verdict = 'fit' WHERE id = 2", (), "verdict in lists"),
    ("UPDATE run SET search = 'x' WHERE id = 2", (), "search looks through"),
    ("UPDATE run SET calibration = 1 WHERE id = 2", (), "not what was written"),
    ("UPDATE run SET label = x'ff' WHERE id = 2", (), ""),
]


@pytest.mark.parametrize(("sql", "values", "words"), SPOILED, ids=[one[0][:60] for one in SPOILED])
def test_whatever_is_changed_behind_its_back_is_found(
    tmp_path: Path, sql: str, values: tuple[Any, ...], words: str
) -> None:
    filled(tmp_path / "r.db")
    with Store(tmp_path / "r.db") as store:
        assert store.check() == []
        store._connection.execute(sql, values)
        found = store.check()
        assert {one.record for one in found} == {"R2"}
        assert any(words in one.what for one in found), found
        assert store.record("R1")["outcomes"] and store.samples("R3").tolist() == LONG


def test_a_damaged_record_is_not_shown_unless_asked_for(tmp_path: Path) -> None:
    filled(tmp_path / "r.db")
    with Store(tmp_path / "r.db") as store:
        store._connection.execute("UPDATE run SET grade = 'aged' WHERE id = 2")
        with pytest.raises(StoreError, match="R2 is damaged") as caught:
            store.record("R2")
        assert (caught.value.details["cause"], caught.value.details["record"]) == ("damaged", "R2")
        record = store.record("R2", even_damaged=True)
        assert record["outcomes"][-1]["verdict"] == "unfit"
        assert len(record["damage"]) == 1
        assert store.record("R1", even_damaged=True)["damage"] == []
        assert store.samples("R2").tolist() == LONG


def test_a_changed_calibration_is_found(tmp_path: Path) -> None:
    filled(tmp_path / "r.db")
    with Store(tmp_path / "r.db") as store:
        store._connection.execute("UPDATE calibration SET document = '{}' WHERE id = 3")
        assert [one.record for one in store.check()] == [None]


def test_a_changed_model_of_a_box_is_found_in_every_record_of_it(tmp_path: Path) -> None:
    filled(tmp_path / "r.db")
    with Store(tmp_path / "r.db") as store:
        store._connection.execute("UPDATE box SET model = 'another'")
        assert [one.record for one in store.check()] == [f"R{number}" for number in range(1, 9)]


def contents(store: Store) -> list[Any]:
    """Everything a reader is shown."""
    names = [one.id for one in store.records(1000)]
    calibrations = [
        {key: value for key, value in one.items() if key != "first_seen_utc"}
        for one in store.calibrations(BOX)
    ]
    return [
        [(store.record(name), store.samples(name).tolist()) for name in names],
        store.records(1000),
        calibrations,
    ]


@pytest.mark.parametrize("seed", range(4))
def test_a_byte_that_changes_anywhere_is_found_or_changes_nothing(tmp_path: Path, seed: int) -> None:
    """Single bytes over the whole file: each is an error in plain words, a finding, or lies where nothing is kept."""
    good = filled(tmp_path / "good.db")
    with Store(tmp_path / "good.db") as store:
        expected = contents(store)
    dice, told = random.Random(seed), {"refused": 0, "found": 0, "harmless": 0}
    used = [at for at, byte in enumerate(good) if byte]  # the rest is mostly room in pages
    for _ in range(60):
        path = tmp_path / "bad.db"
        spoiled = bytearray(good)
        spoiled[dice.choice(used)] ^= dice.randint(1, 255)
        path.write_bytes(spoiled)
        told[_told(path, expected)] += 1
    assert told["found"] > 20, told


def _told(path: Path, expected: list[Any]) -> str:
    try:
        with Store(path) as store:
            store.unfinished()
            if store.check():
                return "found"
            assert contents(store) == expected
            return "harmless"
    except StoreError as error:
        assert error.message and error.remedy
        return "refused"


def test_a_file_cut_short_is_found(tmp_path: Path) -> None:
    good = filled(tmp_path / "good.db")
    with Store(tmp_path / "good.db") as store:
        expected = contents(store)
    for pages in range(1, len(good) // 4096):
        (tmp_path / "bad.db").write_bytes(good[: pages * 4096 + 100])
        assert _told(tmp_path / "bad.db", expected) != "harmless"
