"""The outcome document: the interface's members, its schema, and reading it back."""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from typing import Any

import fastjsonschema
import pytest

import dwellbench.outcome
from dwellbench.judge import analyse
from dwellbench.outcome import EXIT_STATUS, NEXTS, QUANTITIES, VERDICTS, Finding, Outcome
from dwellbench.part import Part

SCHEMA: dict[str, Any] = json.loads(
    (Path(dwellbench.outcome.__file__).parent / "outcome.schema.json").read_text("utf-8")
)
DATA = Path(__file__).parent / "measure" / "data"
FILM = Part("47n 630V film", capacitance_F=47e-9, rated_V=630.0, rated_kind="dc", dielectric="film")
PAPER = Part("50n 600V paper", capacitance_F=50e-9, rated_V=600.0, rated_kind="dc", dielectric="paper")

# The members that scripts rely on, in the interface's own grouping.
MEMBERS = (
    *("schema", "record", "run", "time_utc", "box", "firmware", "calibration", "simulated"),
    *("part", "role", "grade", "verdict", "reason", "next", "findings"),
    *("test_V", "dwell_s", "dwell_complete", "temperature_C", "humidity_percent"),
    *(
        "capacitance_F",
        "total_current_A",
        "leakage_A",
        "insulation_ohm",
        "time_constant_s",
        "absorption_ratio",
    ),
    *("polarisation_index", "recovery_percent", "grid_shift_V"),
    *("limits", "suits", "not_for", "valid_to_V", "not_tested"),
)

KNOWN_KEYWORDS = {
    *(
        "$schema",
        "$ref",
        "title",
        "description",
        "type",
        "definitions",
        "properties",
        "required",
        "additionalProperties",
    ),
    *(
        "items",
        "enum",
        "const",
        "oneOf",
        "minLength",
        "pattern",
        "minimum",
        "maximum",
        "exclusiveMinimum",
        "minItems",
        "maxItems",
    ),
}


@cache
def outcomes() -> dict[str, Outcome]:
    return {
        "fit": analyse(DATA / "film_47n.csv", FILM),
        "place": analyse(DATA / "film_47n.csv", FILM, "coupling@310V/470k"),
        "any": analyse(DATA / "film_47n.csv", FILM, "any"),
        "unfit": analyse(DATA / "paper_2M.csv", PAPER, "coupling"),
        "open": analyse(DATA / "open_lead.csv", FILM),
        "bare": analyse(DATA / "film_1u_step.csv", Part("?")),
        "least": Outcome(
            part=Part("?"), role=None, grade="new", verdict="undecided", reason="Nothing was measured."
        ),
    }


@pytest.fixture(scope="module")
def validate() -> Any:
    return fastjsonschema.compile(SCHEMA, use_default=False)


@pytest.mark.parametrize("name", sorted(outcomes()))
def test_documents_are_whole_and_valid(name: str, validate: Any) -> None:
    document = outcomes()[name].as_json()
    assert set(MEMBERS) <= set(document)
    assert set(document) == set(SCHEMA["properties"]) - {"budgets"}, (
        "document and schema have the same members"
    )
    validate(json.loads(json.dumps(document, allow_nan=False)))


@pytest.mark.parametrize("name", sorted(outcomes()))
def test_a_document_reads_back(name: str) -> None:
    first = outcomes()[name]
    document = json.loads(json.dumps(first.as_json()))
    assert Outcome.from_json(document, first.part) == first


@pytest.mark.parametrize(
    ("member", "value"),
    [
        ("verdict", "good"),
        ("next", "throw"),
        ("schema", 2),
        ("capacitance_F", 1e-9),
        ("capacitance_F", {"value": 1.0}),
        ("findings", [{"id": "Short", "evidence": "x"}]),
        ("limits", [{"id": "x"}]),
        ("grade", "old"),
        ("simulated", None),
        ("reason", ""),
    ],
)
def test_the_schema_refuses(member: str, value: object, validate: Any) -> None:
    document = json.loads(json.dumps(outcomes()["least"].as_json()))
    validate(document)
    document[member] = value
    with pytest.raises(fastjsonschema.JsonSchemaException):
        validate(document)


def test_the_schema_says_what_the_code_says() -> None:
    properties = SCHEMA["properties"]
    assert properties["verdict"]["enum"] == list(VERDICTS)
    assert properties["next"]["enum"] == [*NEXTS, None]
    assert all("quantity" in json.dumps(properties[name]) for name in QUANTITIES)
    assert SCHEMA["required"] == [name for name in properties if name != "budgets"]


def test_the_schema_uses_only_keywords_that_are_checked() -> None:
    """A misspelt keyword is silently ignored by a validator, so each one is looked at."""

    def look(node: Any, names: bool = False) -> None:
        if isinstance(node, dict):
            for key, value in node.items():
                assert names or key in KNOWN_KEYWORDS, key
                look(value, key in ("properties", "definitions") and not names)
        elif isinstance(node, list):
            for value in node:
                look(value)

    look(SCHEMA)


def test_exit_status_and_findings() -> None:
    assert EXIT_STATUS == {"fit": 0, "unfit": 3, "undecided": 4}
    least = outcomes()["least"]
    assert least.exit_status == 4
    stamped = least.stamped(record="R1", findings=(Finding("short", "seen"),))
    assert stamped.record == "R1"
    assert stamped.found("short")
    assert not least.found("short")


def test_any_is_told_and_judged_as_new() -> None:
    made = outcomes()
    assert made["any"].role == "any"
    assert made["any"].verdict == made["fit"].verdict
    assert made["any"].limits == made["fit"].limits
    assert made["fit"].role is None
