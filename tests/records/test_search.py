"""Finding records again."""

from __future__ import annotations

from pathlib import Path

import pytest
from tests.records.contents import BOX, OTHER_BOX, OUTCOME, begin, whole

from dwellbench.errors import UsageError
from dwellbench.records import Store

TEXTS = [
    "a/b\\c",
    "\U0001f600 emoji \U0001f9d1\u200d\U0001f52c",
    "'; DROP TABLE run; --",
    '"quotes" and \u201cothers\u201d',
    "\u05e9\u05dc\u05d5\u05dd \u0645\u0631\u062d\u0628\u0627 2",
    "x" * 10_000,
    "50%_off",
    "line\nbreak\ttab",
    " ",
]


@pytest.mark.parametrize("text", TEXTS)
def test_any_label_and_note_is_kept_and_found(tmp_path: Path, text: str) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store, label=text, note=text)
        whole(store, label="other")
        assert store.record(1)["label"] == store.record(1)["note"] == text
        assert store.count(label=text) == 1
        assert store.last_test(label=text) == store.records(label=text)[0]
        if text.strip():  # every marking has a space
            assert [one.id for one in store.records(text=text[:40])] == [1]


@pytest.mark.parametrize(
    ("kept", "asked"),
    [
        ("Drawer A", "drawer"),
        ("\u00c9tagère", "\u00e9TAG"),
        ("0.1 \u00b5F", "0.1 \u03bcf"),  # the micro sign of the keyboard and the Greek letter
        ("Gro\u00dfe Kiste", "GROSSE"),
        ("\ufb01lm", "film"),
        ("\uff14\uff17n", "47N"),  # wide digits, as an East Asian keyboard gives them
        ("e\u0301tage", "\u00e9tage"),  # accent apart, as some systems write names of files
    ],
)
@pytest.mark.parametrize("where", ["label", "note"])
def test_a_search_does_not_mind_case_and_look_alikes(
    tmp_path: Path, kept: str, asked: str, where: str
) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store, part={"marking": "x"}, **{where: kept})
        whole(store, part={"marking": "x"}, label="none of it")
        assert [one.id for one in store.records(text=asked)] == [1]
        assert store.count(text=asked) == 1


def test_signs_that_searches_give_a_meaning_are_plain_text(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store, label="50%")
        whole(store, label="5000")
        assert [one.id for one in store.records(text="50%")] == [1]
        assert store.records(text="5_0") == store.records(text="[5]") == store.records(text="*") == []


def test_every_way_to_narrow_and_page(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store, label="a", started_utc="2026-01-05T10:00:00Z")
        whole(store, OTHER_BOX, label="b", simulated=False, started_utc="2026-01-06T00:00:00Z")
        begin(store, label="a", part={"marking": "8u 450V"}, started_utc="2026-01-07T10:00:00Z").interrupted(
            "x"
        )

        def found(**where: object) -> list[int]:
            ids = [one.id for one in store.records(**where)]
            assert store.count(**where) == len(ids)
            return ids

        assert found() == [3, 2, 1]
        assert found(label="a") == [3, 1]
        assert found(box=BOX) == [3, 1]
        assert found(simulated=False) == [2]
        assert found(simulated=True) == [3, 1]
        assert found(verdict="fit") == [2, 1]
        assert found(marking="8u 450V") == [3]
        assert found(state="interrupted") == [3]
        assert found(since="2026-01-06") == found(since="2026-01-06T00:00:00Z") == [3, 2]
        assert found(until="2026-01-06T00:00:00Z") == [1]
        assert found(until="2026-01-06") == [1]
        assert found(since="2026-01-06", until="2026-01-07", label="b", text="FILM") == [2]
        assert found(text="") == [3, 2, 1]
        assert [one.id for one in store.records(1, 1)] == [2]
        assert store.records(10, 10**30) == []
        with pytest.raises(TypeError):
            store.records(verdit="fit")


def test_the_last_test_of_a_part_is_the_newest_that_came_to_its_end(tmp_path: Path) -> None:
    with Store(tmp_path / "r.db") as store:
        assert store.last_test(label="C3") is None
        for _ in range(2):
            whole(store, label="C3")
        whole(store, label="C4")
        begin(store, label="C3").interrupted("the link broke")
        found = store.last_test(label="C3")
        assert found is not None and found.id == 2
        assert store.last_test(marking="47n 630V film").id == 3  # type: ignore[union-attr]
        assert store.last_test(label="C4", marking="8u 450V") is None


@pytest.mark.parametrize("name", ["", "17x", "R", "-1", "R1.5", "R1; DROP", "\u0661", "9" * 30, "R 1"])
def test_names_that_are_none(tmp_path: Path, name: str) -> None:
    with Store(tmp_path / "r.db") as store:
        for ask in (store.record, store.samples):
            with pytest.raises(UsageError, match="no record's name"):
                ask(name)


@pytest.mark.parametrize("name", ["R2", "r2", "2", "0002", " R02 ", 2])
def test_names_of_one_record(tmp_path: Path, name: str | int) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store)
        begin(store, label="it").end("complete", None, OUTCOME)
        assert store.record(name)["label"] == "it"
        assert len(store.samples(name)) == 0


@pytest.mark.parametrize("name", ["R3", 0, "999999999999"])
def test_records_that_are_not_there(tmp_path: Path, name: str | int) -> None:
    with Store(tmp_path / "r.db") as store:
        whole(store)
        for ask in (store.record, store.samples):
            with pytest.raises(UsageError, match="There is no record"):
                ask(name)
