"""The table of limits as a whole: what every row must have, and which rows decide."""

from __future__ import annotations

import pytest

from dwellbench.limits.limit import CURRENT_SHAPES, INSULATION, STATUSES, TOTAL_CURRENT, UNSURE
from dwellbench.limits.table import LIMITS, limits_for
from dwellbench.limits.temperature import WARMING, warmed
from dwellbench.measure.estimates import ABSORBED_SHARE
from dwellbench.part import Part
from dwellbench.plan import GRADES

KINDS = (
    *(
        "paper",
        "polyester",
        "polypropylene",
        "polystyrene",
        "polycarbonate",
        "film",
        "mica",
        "glass",
        "vacuum",
    ),
    *("ceramic_1", "ceramic_2", "ceramic", "electrolytic", "tantalum"),
)


def part(kind: str | None, farads: float = 1e-7, rated_V: float | None = 400.0) -> Part:
    return Part("made", capacitance_F=farads, rated_V=rated_V, rated_kind="dc", dielectric=kind)


def test_rows_are_whole() -> None:
    assert len({limit.id for limit in LIMITS}) == len(LIMITS)
    for limit in LIMITS:
        assert limit.status in STATUSES, limit.id
        assert len(limit.source) > 10, limit.id
        assert limit.quantity in (TOTAL_CURRENT, INSULATION), limit.id
        assert limit.shape in CURRENT_SHAPES or limit.shape == "less", limit.id
        assert set(limit.dielectrics) <= set(KINDS), limit.id
        assert set(limit.grades) <= set(GRADES), limit.id
        assert 60.0 <= limit.time_s <= 300.0, limit.id


def test_what_is_unsure_condemns_nothing() -> None:
    for limit in LIMITS:
        assert limit.may_reject == (limit.status != UNSURE), limit.id


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("grade", GRADES)
def test_every_kind_and_grade_has_a_row_that_decides(kind: str, grade: str) -> None:
    for farads in (1e-9, 1e-7, 1e-5):
        ruling, _ = limits_for(part(kind, farads), farads, grade)
        assert ruling, (kind, grade, farads)
        assert any(limit.may_reject for limit in ruling)
        assert all(limit.value(farads, 400.0) > 0.0 for limit in ruling)


@pytest.mark.parametrize("kind", KINDS)
def test_aged_never_asks_more_than_new(kind: str) -> None:
    new, aged = (limits_for(part(kind), 1e-7, grade)[0][0] for grade in ("new", "aged"))
    if new.quantity == INSULATION:
        assert aged.value(1e-7, 400.0) <= new.value(1e-7, 400.0)
    else:
        assert aged.value(1e-7, 400.0) >= new.value(1e-7, 400.0)


def test_nothing_decides_without_a_dielectric_or_a_capacitance() -> None:
    assert limits_for(part(None), 1e-7, "new") == ([], [])
    assert limits_for(part("film"), None, "new") == ([], [])


def test_a_leakage_formula_needs_a_rating() -> None:
    assert limits_for(part("electrolytic", rated_V=None), 1e-5, "new")[0] == []
    assert limits_for(part("film", rated_V=None), 1e-7, "new")[0][0].id == "film_new"
    with pytest.raises(ValueError, match="rated"):
        next(limit for limit in LIMITS if limit.id == "al_new").value(1e-6, None)


def test_every_kind_has_its_warming_and_its_absorption() -> None:
    assert set(WARMING) == set(KINDS)
    assert set(ABSORBED_SHARE) == set(KINDS)
    for kind in KINDS:
        assert warmed(kind, 25.0, 25.0) == 1.0
        assert warmed(kind, 40.0, 25.0) == 1.0, "a cooler place asks no more"
        assert warmed(kind, None, 45.0) == warmed(kind, 23.0, 45.0)
    assert warmed(None, 25.0, 35.0) == 2.0
