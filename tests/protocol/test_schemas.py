"""The schemas are draft-07 and say what the firmware takes; a misspelt keyword, which every validator ignores, is found here."""

from __future__ import annotations

import json
from typing import Any

import pytest
from jsonschema import Draft7Validator

from dwellbench import assets
from dwellbench.wire import schemas
from dwellbox.codes import ENDS, ERRORS, FAULTS, STAGES, STATES
from dwellbox.encode import LINE
from dwellbox.rpc import PARAMS

FOLDER = assets.protocol() / "schemas"
SCHEMAS = {path.stem: json.loads(path.read_text(encoding="utf-8")) for path in sorted(FOLDER.glob("*.json"))}
KEYWORDS = {
    "$schema", "title", "description", "type", "properties", "required", "const", "enum", "oneOf", "items", "additionalItems",
    "minItems", "maxItems", "minimum", "maximum", "minLength", "maxLength", "pattern",
}  # fmt: skip
EVENTS = ("state", "samples", "fault", "done", "log")


def subschemas(schema: Any) -> Any:
    """Every schema inside one, itself included; names of properties are not keywords."""
    yield schema
    for inner in schema.get("properties", {}).values():
        yield from subschemas(inner)
    for inner in schema.get("oneOf", ()):
        yield from subschemas(inner)
    items = schema.get("items", ())
    for inner in [items] if isinstance(items, dict) else items:
        yield from subschemas(inner)


@pytest.mark.parametrize("name", SCHEMAS)
def test_is_draft_07_with_known_keywords_only(name: str) -> None:
    schema = SCHEMAS[name]
    assert schema["$schema"] == "http://json-schema.org/draft-07/schema#"
    Draft7Validator.check_schema(schema)
    for inner in subschemas(schema):
        assert set(inner) <= KEYWORDS, set(inner) - KEYWORDS
        assert set(inner.get("required", ())) <= set(inner.get("properties", ()))
        assert "additionalProperties" not in inner, (
            "unknown members are ignored, so that a newer side may send them"
        )


@pytest.mark.parametrize("name", SCHEMAS)
def test_compiles_for_the_host(name: str) -> None:
    assert schemas.checker(name)
    assert name in schemas.known()


def test_there_is_one_for_each_message() -> None:
    expected = {f"request.{method}" for method in PARAMS} | {f"result.{method}" for method in PARAMS}
    assert set(SCHEMAS) == expected | {f"event.{event}" for event in EVENTS} | {"error"}


@pytest.mark.parametrize("method", PARAMS)
def test_parameters_are_those_that_the_firmware_checks(method: str) -> None:
    params = SCHEMAS[f"request.{method}"]["properties"]["params"]
    assert list(params.get("properties", {})) == [row[0] for row in PARAMS[method]]
    assert params.get("required", []) == [row[0] for row in PARAMS[method] if row[4]]
    for name, kind, least, most, _ in PARAMS[method]:
        said = params["properties"][name]
        if kind is int:
            assert (said["type"], said["minimum"], said["maximum"]) == ("integer", least, most)
        elif kind is bool:
            assert said["type"] == "boolean"
        else:
            assert "enum" in said or (said["type"], said["minLength"], said["maxLength"]) == (
                "string",
                least,
                most,
            )


def _enums(name: str) -> list[list[Any]]:
    return [inner["enum"] for inner in subschemas(SCHEMAS[name]) if "enum" in inner]


@pytest.mark.parametrize(
    ("name", "values"),
    [
        ("event.state", list(STATES)),
        ("event.state", list(STAGES)),
        ("event.fault", list(FAULTS[1:])),
        ("event.done", list(ENDS)),
        ("event.done", list(FAULTS[1:])),
        ("result.status", list(STATES)),
        ("result.status", list(STAGES)),
        ("result.status", list(FAULTS[1:])),
        ("result.hello", list(STATES)),
        ("result.hello", list(FAULTS[1:])),
        ("error", list(ERRORS)),
        ("error", list(ERRORS.values())),
    ],
)
def test_enumerations_are_the_codes(name: str, values: list[Any]) -> None:
    assert values in _enums(name)


def test_a_row_has_eighteen_numbers() -> None:
    row = SCHEMAS["event.samples"]["properties"]["params"]["properties"]["rows"]["items"]
    assert len(row["items"]) == 18
    assert row["additionalItems"] is False
    good = [3, 100, 1, 2, 1, 18, -1, -2, 1, 19, -3, -4, 4, 0, -1, 16720, 1, 1]
    check = Draft7Validator(row)
    assert check.is_valid(good)
    assert not check.is_valid(good[:-1])
    assert not check.is_valid([*good, 0])
    for place in range(18):
        assert not check.is_valid([*good[:place], 0.5, *good[place + 1 :]])


@pytest.mark.parametrize("name", SCHEMAS)
def test_members_stand_in_the_order_they_are_sent(name: str) -> None:
    members = list(SCHEMAS[name]["properties"])
    kind = name.partition(".")[0]
    order = {
        "request": ["jsonrpc", "id", "method", "params", "crc"],
        "result": ["jsonrpc", "result", "id", "crc"],
        "event": ["jsonrpc", "method", "params", "crc"],
        "error": ["jsonrpc", "error", "id", "crc"],
    }
    assert members == order[kind]


def test_the_longest_request_fits_a_line() -> None:
    longest = {
        name: most if kind is int else "x" * most if kind is str else False
        for name, kind, _, most, _ in PARAMS["run"]
    }
    body = {"jsonrpc": "2.0", "id": "x" * 16, "method": "run", "params": longest, "crc": "00000000"}
    assert len(json.dumps(body, separators=(",", ":"))) < LINE
