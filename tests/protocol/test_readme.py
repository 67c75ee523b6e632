"""The page on the wire agrees with codes.json, the schemas and the firmware; every line that it shows is a right one."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from typing import Any

import pytest
from jsonschema import Draft7Validator

from dwellbench import assets
from dwellbench.wire import schemas
from dwellbench.wire.core import unseal
from dwellbox.plan import Plan
from dwellbox.rpc import BY_HAND, PARAMS

PROTOCOL = assets.protocol()
DEVICE = assets.device()
TEXT = (PROTOCOL / "README.md").read_text(encoding="utf-8")
CODES = json.loads((PROTOCOL / "codes.json").read_text(encoding="utf-8"))
EVENTS = ("state", "samples", "fault", "done", "log")


def section(heading: str) -> str:
    """The text under a heading of the third level."""
    found = re.search(rf"^### {heading}\n(.*?)(?=^##)", TEXT, re.MULTILINE | re.DOTALL)
    assert found, heading
    return found[1]


def rows(text: str) -> list[list[str]]:
    """The cells of every table row, without the heading's."""
    lines = [line for line in text.splitlines() if line.startswith("|") and not set(line) <= set("|-")]
    return [[cell.strip() for cell in line.strip("|").split("|")] for line in lines]


def names(cell: str) -> list[str]:
    return re.findall(r"`(\w+)`", cell)


@pytest.mark.parametrize("script", ["make_codes.py", "make_tables.py"])
def test_what_is_generated_is_up_to_date(script: str) -> None:
    done = subprocess.run([sys.executable, str(PROTOCOL / script), "--check"], check=False, timeout=30)
    assert done.returncode == 0, f"run: python protocol/{script}"


def test_the_check_of_a_table_can_fail() -> None:
    sys.path.insert(0, str(PROTOCOL))
    try:
        import make_tables
    finally:
        sys.path.remove(str(PROTOCOL))
    assert make_tables.with_tables(TEXT, CODES) == TEXT
    other = json.loads(json.dumps(CODES))
    other["faults"][3]["text"] = "something else"
    assert make_tables.with_tables(TEXT, other) != TEXT
    assert set(re.findall(r"<!-- (\w+) -->", TEXT)) == set(make_tables.COLUMNS)


def shown() -> list[tuple[str, dict[str, Any]]]:
    """Every line shown, with the heading it stands under."""
    found = []
    heading = ""
    for line in TEXT.splitlines():
        if line.startswith("### "):
            heading = line[4:]
        elif line.startswith('    {"jsonrpc"'):
            found.append((heading, unseal(line.strip().encode())))  # a wrong checksum raises here
    return found


def test_every_line_shown_is_valid() -> None:
    for heading, message in shown():
        method = heading or "hello"
        if "method" in message and ("id" in message or message["method"] not in EVENTS):
            name = f"request.{message['method']}"
        elif "method" in message:
            name = f"event.{message['method']}"
        else:
            name = "error" if "error" in message else f"result.{method}"
        schemas.check(name, message)
        schema = json.loads((PROTOCOL / "schemas" / f"{name}.json").read_text(encoding="utf-8"))
        assert Draft7Validator(schema).is_valid(message), (heading, message)


def test_every_method_and_event_has_its_section_with_an_example() -> None:
    headings = re.findall(r"^### (\w+)$", TEXT, re.MULTILINE)
    assert sorted(headings) == sorted([*PARAMS, *EVENTS])
    assert {message["method"] for _, message in shown() if "method" in message} == {*PARAMS, *EVENTS}
    answered = {heading for heading, message in shown() if "result" in message and heading}
    assert answered == set(PARAMS) - {"keepalive"}


@pytest.mark.parametrize("method", ["hello", "status"])
def test_every_member_of_an_answer_is_explained(method: str) -> None:
    schema = json.loads((PROTOCOL / "schemas" / f"result.{method}.json").read_text(encoding="utf-8"))
    explained = [name for row in rows(section(method))[1:] for name in names(row[0])]
    assert sorted(explained) == sorted(schema["properties"]["result"]["properties"])


def test_the_parameters_of_a_run() -> None:
    """Names, ranges and defaults of the table are the firmware's."""
    limits = {name: (kind, least, most, required) for name, kind, least, most, required in PARAMS["run"]}
    defaults = vars(Plan({"run_key": "k", "volts_mv": 1, "dwell_ms": 1}))
    explained = []
    for cells in rows(section("run"))[1:]:
        for place, name in enumerate(names(cells[0])):
            explained.append(name)
            kind, least, most, required = limits[name]
            part = cells[1].split(", ")[place] if len(names(cells[0])) > 1 else cells[1]
            if kind is bool:
                assert part == "true, false"
            elif name not in (
                "volts_mv",
                "dwell_ms",
                "bleed_ms",
                "recovery_ms",
            ):  # bounded by the plan's own check
                assert part.removesuffix(" characters") == f"{least} to {most}"
            assert (cells[2] == "") == required
            if not required:
                assert cells[2] == json.dumps(defaults[name])
    assert sorted(explained) == sorted(limits)


def test_bounds_of_the_plan_itself() -> None:
    source = (DEVICE / "dwellbox" / "plan.py").read_text(encoding="utf-8")
    bound = {
        name: int(value) for name, value in re.findall(r"^_(\w+) = const\((\d+)\)", source, re.MULTILINE)
    }
    text = section("run")
    assert f"`volts_mv` | {bound['LEAST_MV']} to the rating" in text
    assert f"`dwell_ms` | {bound['LEAST_DWELL_MS']} to the rating" in text
    for name in ("bleed_ms", "recovery_ms"):
        assert f"`{name}` | 0 to {bound['MOST_BLEED_MS']}" in text


def test_parameters_are_all_named() -> None:
    for method, table in PARAMS.items():
        for row in table:
            assert f"`{row[0]}`" in section(method) or f'"{row[0]}"' in section(method), (method, row[0])


def test_the_row_of_a_sample() -> None:
    table = rows(TEXT[TEXT.index("A row is 18 whole numbers") : TEXT.index("Volts at the converter")])[1:]
    places = [int(place) for cells in table for place in cells[0].split(",")]
    called = [name.strip() for cells in table for name in cells[1].split(",")]
    assert places == list(range(18))
    said = "n t stage shunt range nv sv vmin vmax ni si imin imax iclip vs temp flags vrange"
    assert called == said.split()


def test_limits_are_the_firmwares() -> None:
    """Numbers stated twice: here and in the firmware's modules."""
    found: dict[str, int] = {}
    for module in ("wire", "encode", "scan", "rpc", "answers"):
        source = (DEVICE / "dwellbox" / f"{module}.py").read_text(encoding="utf-8")
        for name, value in re.findall(r"^(_?[A-Z_]+) = const\((0x[0-9A-F]+|\d+)\)", source, re.MULTILINE):
            found[f"{module}.{name}"] = int(value, 0)
    reference = json.loads((DEVICE / "reference_box.json").read_text(encoding="utf-8"))
    byte_us, ask_us, out_us = found["encode.BYTE_US"], found["encode.ASK_US"], found["wire._OUT_US"]
    least = -(-out_us // (byte_us + ask_us))  # bytes, asking for room before each
    most = -(-(out_us - ask_us) // byte_us)  # asking once
    for phrase in (
        f"at most **{found['encode.LINE']} bytes**",
        f"{found['wire._IN']} bytes in and {least} to {most} out a period of {reference['times']['period_ms']} ms",
        f"not read for {found['wire._PATIENCE_MS']} ms",
        f"{found['wire._COUNT']} if left out",
        f"from 0 to {found['rpc._ID_MOST']} (2^30 - 1), or 1 to {found['rpc._ID_LETTERS']} printable",
        f"at most {found['scan._DIGITS']} digits",
        f"none comes for **{reference['safe']['silence_ms'] // 1000} s**",
        f"has at most {found['answers._PAGE']} characters",
        f"At most {found['answers._PAGES']} pages of {found['answers._PAGE']}",
    ):
        assert phrase in TEXT, phrase
    assert (found["wire._QUEUE"], "Up to four wait" in TEXT) == (4, True)
    assert (found["scan._DEPTH"], "at most six levels" in TEXT) == (6, True)


def test_codes_that_are_spoken_of_exist() -> None:
    known = {row["code"] for row in CODES["errors"]}
    spoken = {int(code) for code in re.findall(r"(?<!\d)-32\d\d\d", TEXT)} - {
        -32768
    }  # a converter's least code
    assert spoken - known == set()
    words = {row["id"] for group in ("faults", "ends", "states", "stages", "flags") for row in CODES[group]}
    for word in (
        "link_lost",
        "over_energy",
        "value_off",
        "reversed",
        "over_current",
        "charge_left",
        "lockout",
        "waking",
    ):
        assert word in words
        assert f"`{word}`" in TEXT


def test_what_may_be_typed_by_hand() -> None:
    assert "may ask (`hello`, `status`) and may stop (`abort`)" in TEXT
    assert set(BY_HAND) == {"hello", "status", "abort"}
