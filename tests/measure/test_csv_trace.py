"""Trace files: what is read, what is written, and what is refused with file, line and remedy."""

from __future__ import annotations

from dataclasses import fields, replace
from pathlib import Path

import numpy as np
import pytest

from dwellbench.errors import TraceError
from dwellbench.judge import analyse, judge
from dwellbench.measure.csv_read import parse_csv, read_csv
from dwellbench.measure.csv_write import csv_text, write_csv
from dwellbench.measure.trace import Trace
from dwellbench.part import Part

DATA = Path(__file__).parent / "data"
HEAD = "t_s,stage,shunt_ohm,v_part_V,i_shunt_A,v_supply_V"
ROWS = [
    "0.1,charge,560,100.0,1e-4,400.0",
    "0.2,charge,560,200.0,1e-5,400.0",
    "0.3,dwell,560,399.0,1e-8,400.0",
]


def text(*rows: str, head: str = HEAD, before: str = "") -> str:
    return before + "\n".join([head, *rows]) + "\n"


def same(one: Trace, other: Trace) -> None:
    for field in fields(Trace):
        if field.name != "header":
            np.testing.assert_array_equal(
                getattr(one, field.name), getattr(other, field.name), err_msg=field.name
            )


def test_what_is_left_out_has_its_stated_meaning() -> None:
    trace = parse_csv(text(*ROWS))
    assert trace.interval_s == pytest.approx([0.1, 0.1, 0.1])
    assert trace.clipped.tolist() == [0.0, 0.0, 0.0]
    assert set(trace.range_V) == {1.024}
    assert trace.u_offset_A == pytest.approx(0.5 * 1.024 / 32768 / 560)
    assert trace.assumed == (
        "charge_ohm",
        "divider_ohm",
        "bleed_ohm",
        "fixture_ohm",
        "temperature_C",
        "u_gain_v",
        "u_gain_i",
    )
    assert np.isnan(trace.v_min_V).all()


def test_header_numbers_words_and_remarks() -> None:
    before = (
        "# charge_ohm = 470000\n# a remark without a value\n# marking = 47n 630V film\n# box = 00012345\n\n"
    )
    trace = parse_csv(text(*ROWS, before=before))
    assert trace.number("charge_ohm") == 470000.0
    assert trace.text("marking") == "47n 630V film"
    assert trace.text("box") == "00012345"
    assert "charge_ohm" not in trace.assumed


def test_other_columns_stages_and_line_ends_are_accepted() -> None:
    odd = text("0.1,prove,560,5.2,0,100,hello", "0.2,charge,560,5.2,0,100,", head=HEAD + ",remark")
    trace = parse_csv("\ufeff" + odd.replace("\n", "\r\n"))
    assert trace.stage.tolist() == ["prove", "charge"]


def test_the_part_sees_the_node_less_the_shunt() -> None:
    trace = parse_csv(text("0.1,dwell,1000,100.0,1e-3,400", "0.2,dwell,1000,100.0,1e-3,400"))
    assert trace.across_V == pytest.approx([99.0, 99.0])


@pytest.mark.parametrize(
    ("wrong", "line", "word"),
    [
        ("", None, "no table"),
        ("# only = this\n", None, "no table"),
        (text(*ROWS, head=HEAD.replace(",v_supply_V", "")), 1, "v_supply_V"),
        (text(*ROWS, head=HEAD.replace(",", ";")), 1, "missing"),
        (text(ROWS[0]), None, "1 row"),
        (text(), None, "0 row"),
        (text(ROWS[0], "0.2,charge,560,volts,1e-5,400"), 3, "volts"),
        (text(ROWS[0], "0.2,charge,560,nan,1e-5,400"), 3, "nan"),
        (text(ROWS[0], "0.2,charge,560,inf,1e-5,400"), 3, "inf"),
        (text(ROWS[0], "0.2,charge,560,,1e-5,400"), 3, "v_part_V"),
        (text(ROWS[0], "0.1,charge,560,1,1e-5,400"), 3, "does not advance"),
        (text(ROWS[0], "0.05,charge,560,1,1e-5,400"), 3, "does not advance"),
        (text(ROWS[0], "0.2,charge,560,1,1e-5"), 3, "cells"),
        (text(ROWS[0], "0.2,charge,-560,1,1e-5,400"), 3, "shunt_ohm"),
        (text(ROWS[0], "0.2,,560,1,1e-5,400"), 3, "stage"),
        (text(*[row + ",0.5" for row in ROWS], head=HEAD + ",clipped"), None, "clipped"),
        (text(*[row + ",0" for row in ROWS], head=HEAD + ",range_V"), 2, "range_V"),
        (text(*[row + ",1" for row in ROWS], head=HEAD + ",t_s"), 1, "twice"),
        (
            text(*[row.replace("charge", "x").replace("dwell", "y") for row in ROWS]),
            None,
            "nothing to measure",
        ),
        (text(*ROWS, before="# charge_ohm = large\n"), 1, "large"),
        (text(*ROWS, before="# u_gain_v = -1\n"), 1, "u_gain_v"),
        (text(*ROWS, before="# fixture_ohm = 0\n"), 1, "fixture_ohm"),
    ],
)
def test_what_is_no_trace_is_refused(wrong: str, line: int | None, word: str) -> None:
    with pytest.raises(TraceError) as caught:
        parse_csv(wrong, "my.csv")
    assert caught.value.message.startswith("my.csv")
    assert caught.value.details["line"] == line
    assert word in caught.value.message
    assert caught.value.remedy
    assert caught.value.exit == 2


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    with pytest.raises(TraceError, match=r"nothing\.csv.*cannot be read"):
        read_csv(tmp_path / "nothing.csv")
    odd = tmp_path / "odd.csv"
    odd.write_bytes(b"\xff\xfe\x00t_s")
    with pytest.raises(TraceError, match="UTF-8"):
        read_csv(odd)
    with pytest.raises(TraceError, match="cannot be read"):
        read_csv(tmp_path)


@pytest.mark.parametrize("name", ["film_47n", "electrolytic_forming", "film_1u_step", "bursts"])
def test_an_export_reads_back_to_the_same_outcome(name: str, tmp_path: Path) -> None:
    first = read_csv(DATA / f"{name}.csv")
    write_csv(first, tmp_path / "again.csv")
    again = read_csv(tmp_path / "again.csv")
    same(first, again)
    assert dict(first.header) == dict(again.header)
    marking = {"film_47n": "47n 630V film", "electrolytic_forming": "22uF 450V electrolytic"}.get(
        name, "100n 400V film"
    )
    assert analyse(first, marking, "coupling").as_json() == analyse(again, marking, "coupling").as_json()


def test_a_word_with_a_line_break_does_not_break_the_header() -> None:
    trace = parse_csv(text(*ROWS))
    odd = Trace(
        **{**{f.name: getattr(trace, f.name) for f in fields(Trace)}, "header": {"note": "two\nlines"}}
    )
    assert parse_csv(csv_text(odd)).text("note") == "two lines"


BOXED = {
    "run": 7,
    "run_key": "00ab12cd34ef5678",
    "box": "0011223344556677",
    "firmware": "0.1.0",
    "simulated": True,
    "calibration": "12345678",
    "end": "short",
    "short_mv": 187,
    "short_na": 241000,
    "residual_mv": 12000,
    "look_pf": 47000,
    "humidity_percent": 41.0,
}


@pytest.mark.parametrize("end", ["short", "complete", "reversed", "residual", "value_off"])
def test_what_a_box_said_of_its_run_reads_back(end: str) -> None:
    """Identifiers keep their zeros, numbers stay numbers, and the outcome stays the same."""
    trace = read_csv(DATA / "film_47n.csv")
    boxed = replace(trace, header={**trace.header, **BOXED, "end": end})
    again = parse_csv(csv_text(boxed))
    assert again.text("box") == "0011223344556677"
    assert again.number("short_na") == 241000.0
    marked = Part("47n 630V film", capacitance_F=4.7e-8, rated_V=630.0, rated_kind="dc", dielectric="film")
    assert judge(again, marked).as_json() == judge(boxed, marked).as_json()
    assert judge(again, marked).simulated is True
