"""`limits`: nothing without its source, and values worked out for a part."""

from __future__ import annotations

import json

import pytest

from dwellbench.cli import main as cli
from dwellbench.cli.commands.limits import _RULES, _SHAPES
from dwellbench.limits.limit import CURRENT_SHAPES, STATUSES
from dwellbench.limits.places import KINDS
from dwellbench.limits.table import LIMITS


def asked(capsys: pytest.CaptureFixture[str], *arguments: str) -> dict[str, object]:
    assert cli.run(["limits", "--json", *arguments]) == 0
    document: dict[str, object] = json.loads(capsys.readouterr().out)
    return document


def test_every_limit_is_listed_with_its_source_and_status(capsys: pytest.CaptureFixture[str]) -> None:
    rows = asked(capsys)["limits"]
    assert isinstance(rows, list)
    assert [row["id"] for row in rows] == [limit.id for limit in LIMITS]
    assert all(row["source"] and row["status"] in STATUSES and row["rule"] for row in rows)


def test_the_values_for_a_part(capsys: pytest.CaptureFixture[str]) -> None:
    """20 uF 450 V: 1.1 mA by JAN-C-62 (worked example quoted with that standard's formula on an amateur radio mailing list)."""
    rows = asked(capsys, "--part", "20 uF 450V electrolytic")["limits"]
    assert isinstance(rows, list)
    here = {row["id"]: row["here"] for row in rows}
    assert here["jan_c_62_450V"] == "1.1 mA"
    assert here["al_new"] == "90 uA"
    assert "jan_c_62_250V" not in here


def test_every_place_is_listed_with_what_it_tolerates(capsys: pytest.CaptureFixture[str]) -> None:
    rows = asked(capsys, "--roles")["roles"]
    assert isinstance(rows, list)
    assert [row["id"] for row in rows] == [kind.id for kind in KINDS]
    assert all(row["tolerates"] and row["source"] for row in rows)


def test_for_people_too(capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.run(["limits"]) == cli.run(["limits", "--roles"]) == 0
    out = capsys.readouterr().out
    assert "from memory" in out
    assert "no leakage test makes a part" in out


def test_every_shape_and_rule_has_words() -> None:
    assert set(_SHAPES) == set(CURRENT_SHAPES)
    assert {kind.rule for kind in KINDS} == set(_RULES)
