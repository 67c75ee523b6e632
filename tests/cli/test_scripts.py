"""The command line as a script meets it: documents, streams and their last line, status, pipes that break, encodings."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from tests.cli.test_commands import FILM_ARGS, Run, run

from dwellbench.cli import main as cli

__all__ = ["run"]  # the fixture
MAIN = "from dwellbench.cli.main import main; main()"


def begun(folder: Path, *arguments: str, **environment: str) -> subprocess.Popen[bytes]:
    """The command in a process of its own, its two outputs in pipes."""
    own = {
        "PYTHONPATH": os.pathsep.join(sys.path),
        "DWELLBENCH_RECORDS": str(folder / "records.db"),
        "XDG_CONFIG_HOME": str(folder),
    }
    return subprocess.Popen(
        [sys.executable, "-c", MAIN, *arguments],
        env={**os.environ, **own, **environment},
        stdin=subprocess.DEVNULL,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )


@pytest.mark.parametrize("arguments", [("--json",), ("records", "--json")])
def test_a_script_that_leaves_its_command_out_gets_an_error(run: Run, arguments: tuple[str, ...]) -> None:
    status, out, _ = run(*arguments)
    assert (status, json.loads(out)["error"]["exit"]) == (2, 2)


def test_global_options_may_stand_between_a_command_and_its_second_word(run: Run, tmp_path: Path) -> None:
    for arguments in (("records", "--json", "list"), ("records", "list", "--json")):
        status, out, _ = run(*arguments)
        assert (status, json.loads(out)["total"]) == (0, 0)
    for arguments in (("--json", "records", "--records", str(tmp_path), "list"), ("demo", "--jsn", "--json")):
        assert run(*arguments)[0] in (2, 8)


@pytest.mark.parametrize(
    "arguments",
    [
        ("demo", "--json", "--seed", "x"),
        ("demo", "--json", "--records", "/proc/no/such"),
        ("emulate", "--json"),
        ("--json", "emulate", "--tcp", "nowhere"),
        ("--json", "emulate", "--pty", "/no/such/folder/x"),
    ],
)
def test_the_error_that_ends_a_stream_is_one_line_that_carries_its_event(
    run: Run, arguments: tuple[str, ...]
) -> None:
    status, out, _ = run(*arguments)
    lines = [json.loads(line) for line in out.splitlines()]
    assert [line["event"] for line in lines] == ["error"]
    assert lines[0]["error"]["exit"] == status


def test_an_error_document_of_a_single_answer_carries_no_event(run: Run) -> None:
    _, out, _ = run("records", "show", "17", "--json")
    assert set(json.loads(out)) == {"error"}


@pytest.mark.skipif(sys.platform == "win32", reason="pseudo-terminals")
def test_serving_is_a_stream_that_ends_with_a_summary(tmp_path: Path) -> None:
    with begun(tmp_path, "emulate", "--json", "--pty", str(tmp_path / "bench")) as process:
        assert process.stdout is not None
        first = json.loads(process.stdout.readline())
        process.terminate()
        rest = [json.loads(line) for line in process.stdout.read().splitlines()]
    assert process.returncode == 0
    assert first == {"event": "serving", "url": str(tmp_path / "bench")}
    assert [line["event"] for line in rest] == ["summary"]


def test_a_reader_who_leaves_is_no_defect_and_no_verdict(tmp_path: Path) -> None:
    for arguments in (("records", "list"), ("--box", "emu://film", *FILM_ARGS)):
        with begun(tmp_path, *arguments) as process:
            assert process.stdout is not None
            process.stdout.close()
            assert process.wait(timeout=60) == 130
            assert process.stderr is not None
            assert process.stderr.read() == b""


def test_what_broke_off_with_its_reader_is_kept_and_said_to_be_stopped(tmp_path: Path, run: Run) -> None:
    with begun(
        tmp_path, "--box", "emu://film", "test", "47n 630V film", "--dwell", "600", "--yes"
    ) as process:
        assert process.stdout is not None
        while b"Holding" not in process.stdout.readline():
            pass
        process.stdout.close()
        assert process.wait(timeout=60) == 130
    (record,) = json.loads(run("records", "list", "--json")[1])["records"]
    assert (record["state"], record["verdict"]) == ("interrupted", None)


def test_letters_that_a_pipe_cannot_carry_are_no_reason_to_fail(tmp_path: Path) -> None:
    plain = {"PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"}
    arguments = ("--box", "emu://film", *FILM_ARGS, "--note", "\u03a9 f\u00fcr \u00b5F")
    with begun(tmp_path, *arguments, **plain) as process:
        out, _ = process.communicate(timeout=60)
    assert process.returncode == 0
    assert b"capacitance" in out
    with begun(tmp_path, "records", "show", "R1", "--json", **plain) as process:
        out, _ = process.communicate(timeout=60)
    assert json.loads(out)["note"] == "\u03a9 f\u00fcr \u00b5F"


def test_no_box_names_a_way_to_try_without_hardware(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("dwellbench.cli.reach.ports", list)
    status, out, _ = run("test", "47n 630V film", "--yes", "--json")
    error = json.loads(out)["error"]
    assert (status, error["exit"], error["kind"]) == (7, 7, "no_box")
    assert "--box emu://demo" in error["remedy"]
    assert run("--box", "emu://demo", *FILM_ARGS)[0] == 0


def test_several_ports_are_named_and_none_is_guessed(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    found = [{"url": f"/dev/ttyACM{n}", "what": "a board"} for n in range(2)]
    monkeypatch.setattr("dwellbench.cli.reach.ports", lambda: found)
    status, _, err = run("box")
    assert status == 7
    assert "/dev/ttyACM0, /dev/ttyACM1" in err
    assert "--box" in err


def test_a_defect_of_our_own_is_a_sentence_and_a_file(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(*arguments: Any) -> None:
        raise ZeroDivisionError("by nought")

    monkeypatch.setattr("dwellbench.cli.commands.test.Place.parse", broken)
    status, out, err = run("test", "47n 630V film", "--dry-run")
    assert status == 1
    assert "defect of its own (ZeroDivisionError: by nought)" in err
    assert "Traceback" not in out + err
    report = Path(err.rsplit(" with ", 1)[1].strip().rstrip("."))
    assert "by nought" in report.read_text()
    report.unlink()


@pytest.mark.parametrize("value", ["nan", "-1", "inf", "1e12"])
def test_a_series_resistance_that_cannot_be_is_refused(run: Run, value: str) -> None:
    for arguments in (("test", "47n 630V film", "--dry-run"), ("analyse", "run.csv")):
        status, _, err = run(*arguments, "--esr", value)
        assert status == 2
        assert "no series resistance" in err


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('[thresholds]\naccept = "0.9"\n', "accept is not a number"),
        ("[thresholds]\nreject = true\n", "reject is not a number"),
        ("[places]\nmine = 3\n", "mine is not a place in quotes"),
    ],
)
def test_a_configuration_of_the_wrong_kind_is_told_where_it_is_wrong(
    run: Run, tmp_path: Path, text: str, words: str
) -> None:
    (tmp_path / "wrong.toml").write_text(text)
    status, _, err = run("--config", str(tmp_path / "wrong.toml"), "limits")
    assert status == 2
    assert words in err
    assert "wrong.toml" in err


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--box", "emu://empty", "zero", "--volts", "0", "--yes"), "0 V is no test voltage"),
        (("--box", "emu://film", "test", "47n 630V film", "--volts", "0", "--yes"), "0 V is no test voltage"),
        (("limits", "--part", ""), "marking is empty"),
        (("--box", "emu://film", "box", "--shorted"), "--acknowledge"),
    ],
)
def test_nought_and_nothing_are_not_taken_for_left_out(
    run: Run, arguments: tuple[str, ...], words: str
) -> None:
    status, _, err = run(*arguments)
    assert status == 2
    assert words in err


def test_an_error_that_nobody_reads_keeps_its_status(tmp_path: Path) -> None:
    with begun(tmp_path, "records", "show", "17") as process:
        assert process.stderr is not None
        process.stderr.close()
        assert process.wait(timeout=20) == 2


def test_a_marking_without_quotes_is_told_to_have_them(run: Run) -> None:
    status, _, err = run("test", "47n", "630V", "film")
    assert status == 2
    assert "quotes" in err


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        # 470 kohm x (310 V / 0.1 V - 1) = 1.457 Gohm at the place; ten times in 60 K, 22 K cooler: times 2.33
        (("47n 630V film", "--role", "coupling@310V/470k"), "insulation at least 3.39 Gohm"),
        (("22 uF 450V electrolytic", "--role", "supply_filter"), "leakage at most"),
        (("100nM 630V film", "--role", "across_the_line"), "own safety approval"),
        (("10n 1600V polypropylene", "--role", "buffer", "--volts", "400"), "pulses beyond this box"),
        (("47n 630V film",), "at least 3.03 Gohm after 60 s"),
    ],
)
def test_a_dry_run_says_what_the_part_will_be_held_against(
    run: Run, arguments: tuple[str, ...], words: str
) -> None:
    status, out, err = run("test", *arguments, "--dry-run")
    assert status == 0, err
    assert words in out
    document = json.loads(run("test", *arguments, "--dry-run", "--json")[1])
    assert document["energised"] is False
    assert (document["place"] is None) == ("--role" not in arguments)
    assert all(row["value"] > 0 and row["unit"] in ("ohm", "A") for row in document["limits"])


def test_streams_are_commands() -> None:
    assert set(cli.STREAMS) <= set(cli.COMMANDS)
