"""The commands as a user meets them: what they print, on which stream, with which status; and wrong things typed."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import fastjsonschema
import pytest
from tests.helpers import FILM, OPEN, SHORT, fault, scenario

from dwellbench.cli import main as cli

Run = Callable[..., tuple[int, str, str]]
OUTCOME = json.loads((Path(cli.__file__).parents[1] / "outcome.schema.json").read_text("utf-8"))


@pytest.fixture
def run(tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Run:
    """Run a command line with records and configuration of its own; return status, standard output, standard error."""
    for name in ("DWELLBENCH_BOX", "DWELLBENCH_CONFIG"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("DWELLBENCH_RECORDS", str(tmp_path / "records.db"))
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))

    def call(*arguments: str) -> tuple[int, str, str]:
        status = cli.run(list(arguments))
        said = capsys.readouterr()
        return status, said.out, said.err

    return call


FILM_ARGS = ("test", "47n 630V film", "--role", "coupling@310V/470k", "--dwell", "10", "--yes")


def test_test_says_the_word_the_reason_and_the_record(run: Run) -> None:
    status, out, _ = run("--box", "emu://film", *FILM_ARGS)
    assert status == 0
    assert "USE" in out
    assert "record R1" in out
    assert "simulated" in out
    assert "shorting wire" in out
    assert "hands off" in out


def test_json_is_one_document_on_standard_output_and_nothing_else(run: Run) -> None:
    status, out, err = run("--box", "emu://film", *FILM_ARGS, "--json")
    outcome = json.loads(out)
    fastjsonschema.compile(OUTCOME)(outcome)
    assert (status, outcome["verdict"], outcome["record"]) == (0, "fit", "R1")
    assert "hands off" in err


@pytest.mark.parametrize(("body", "verdict", "status"), [(SHORT, "unfit", 3), (OPEN, "unfit", 3)])
def test_the_status_tells_the_verdict(run: Run, tmp_path: Path, body: str, verdict: str, status: int) -> None:
    got, out, _ = run("--box", scenario(tmp_path, body), *FILM_ARGS, "--json")
    assert (got, json.loads(out)["verdict"]) == (status, verdict)


def test_global_options_may_stand_before_or_after(run: Run, tmp_path: Path) -> None:
    first = run("--json", "--records", str(tmp_path / "a.db"), "records", "list")
    second = run("records", "list", "--json", "--records", str(tmp_path / "a.db"))
    assert first[:2] == second[:2]
    assert json.loads(first[1]) == {"records": [], "total": 0, "offset": 0}


def test_a_dry_run_needs_no_box_and_energises_nothing(run: Run) -> None:
    status, out, _ = run("test", ".1 MFD 400 WVDC paper", "--role", "coupling", "--dry-run")
    assert status == 0
    assert "Nothing is energised" in out
    assert "400 V" in out
    status, out, _ = run("test", "47n 630V film", "--dry-run", "--json")
    document = json.loads(out)
    assert (status, document["energised"], document["plan"]["volts_mv"]) == (0, False, 630000)


def test_records_list_and_show(run: Run) -> None:
    run("--box", "emu://film", *FILM_ARGS, "--label", "drawer 3", "--note", "from the <attic>")
    status, out, _ = run("records", "list", "--json", "--text", "drawer")
    (record,) = json.loads(out)["records"]
    assert (status, record["record"], record["verdict"], record["simulated"]) == (0, "R1", "fit", True)
    assert json.loads(run("records", "list", "--json", "--verdict", "unfit")[1])["total"] == 0
    status, out, _ = run("records", "show", "R1")
    assert status == 0
    assert "from the <attic>" in out
    assert json.loads(run("records", "show", "1", "--json")[1])["outcomes"][0]["verdict"] == "fit"


def test_box_says_who_it_is_and_whether_it_may_be_touched(run: Run) -> None:
    status, out, _ = run("--box", "emu://film", "box")
    assert status == 0
    assert "650 V" in out
    assert "hands off" in out
    document = json.loads(run("--box", "emu://film", "box", "--json")[1])
    assert document["identity"]["model"] == "reference"
    assert document["status"]["state"] == "waking"


def test_a_lockout_is_told_with_its_remedy_and_acknowledged(run: Run, tmp_path: Path) -> None:
    url = (
        scenario(tmp_path, FILM, extra=fault("stop_pressed", 12.0, for_s=5.0))
        + f"?state={tmp_path / 'kept.json'}"
    )
    status, out, _ = run("--box", url, "test", "47n 630V film", "--dwell", "30", "--yes", "--json")
    assert (status, json.loads(out)["fault"]) == (4, "stop")
    status, out, _ = run("--box", url, "box")
    assert status == 6
    assert "stop button" in out
    status, out, _ = run("--box", url, *FILM_ARGS)
    assert status == 6
    status, out, _ = run("--box", url, "box", "--acknowledge")
    assert status == 0
    assert run("--box", url, *FILM_ARGS)[0] == 0


def test_analyse_reads_a_trace_without_a_box(run: Run, tmp_path: Path) -> None:
    trace = next((Path(__file__).parents[1] / "measure" / "data").glob("film*.csv"))
    status, out, _ = run("analyse", str(trace), "--part", "100n 630V film", "--json")
    outcome = json.loads(out)
    assert status in (0, 3, 4)
    assert outcome["capacitance_F"]["value"] > 0
    assert outcome["record"] is None


def test_the_demo_ends_with_every_verdict_right_for_its_invented_truth(run: Run, tmp_path: Path) -> None:
    status, out, _ = run("demo", "--records", str(tmp_path / "demo.db"), "--json")
    lines = [json.loads(line) for line in out.splitlines()]
    assert status == 0
    assert [line["event"] for line in lines] == ["part"] * (len(lines) - 1) + ["summary"]
    for line in lines[:-1]:
        assert line["outcome"]["verdict"] == line["expect"], line["label"]
        assert line["outcome"]["simulated"]
    assert lines[-1]["as_expected"] == lines[-1]["parts"] >= 10
    assert (
        json.loads(run("records", "list", "--json", "--records", str(tmp_path / "demo.db"))[1])["total"]
        == lines[-1]["parts"]
    )


def test_a_wire_log_keeps_every_line(run: Run, tmp_path: Path) -> None:
    run("--box", "emu://film", "box", "--wire-log", str(tmp_path / "log"))
    lines = (tmp_path / "log").read_text().splitlines()
    assert any(" > " in line and '"hello"' in line for line in lines)
    assert any(" < " in line and '"ratings"' in line for line in lines)


WRONG: list[tuple[tuple[str, ...], int, str]] = [
    (("tset",), 2, "no command"),
    (("test",), 2, "MARKING"),
    (("test", ".05/600"), 2, "which number is what"),
    (("test", "gibberish"), 2, "No capacitance"),
    (("test", "47n 630V film", "--role", "cupling"), 2, "not a place"),
    (("test", "47n 630V film", "--volts", "900", "--dry-run"), 2, "above this box's 650 V"),
    (("test", "47n 630V film", "--dwell", "long"), 2, "not a time"),
    (("test", "47n 630V film", "--grade", "best"), 2, "grade"),
    (("test", "47n film", "--dry-run"), 2, "No voltage rating"),
    (("test", "0.1uF 275VAC X2", "--dry-run"), 2, "AC rating"),
    (("test", "47n 630V film", "--looks", "bulged"), 2, "not energised"),
    (("test", "40+20 uF 450V", "--dry-run"), 2, "one is tested at a time"),
    (("--box", "emu://film", "test", "47n 630V film"), 2, "no terminal"),
    (("--box", "/dev/no-such-port", "box"), 7, "nothing to open"),
    (("--box", "emu://nothing", "box"), 2, "no scenario"),
    (("analyse", "no-such-file.csv", "--part", "47n 630V"), 2, "no-such-file.csv"),
    (("emulate",), 2, "--pty"),
    (("emulate", "--tcp", "nowhere"), 2, "HOST:PORT"),
    (("records", "show", "seventeen"), 2, "no record's name"),
    (("records", "show", "17"), 2, "no record R17"),
    (("records", "list", "--since", "yesterday"), 2, "not a day"),
    (("--config", "no-such.toml", "box"), 2, "no configuration file"),
]


@pytest.mark.parametrize(("arguments", "status", "words"), WRONG, ids=[" ".join(row[0]) for row in WRONG])
def test_wrong_things_typed_get_one_clear_sentence(
    run: Run, arguments: tuple[str, ...], status: int, words: str
) -> None:
    got, out, err = run(*arguments)
    assert got == status
    assert words in err
    assert "Traceback" not in err + out
    got, out, err = run(*arguments, "--json")
    document: dict[str, Any] = json.loads(out)["error"]
    assert got == status == document["exit"]
    assert words in document["message"] + document["remedy"]
    assert {"kind", "message", "remedy", "exit"} <= set(document)


def test_records_that_cannot_be_used(run: Run, tmp_path: Path) -> None:
    text = tmp_path / "text.db"
    text.write_text("this is no database, and long enough to be looked at " * 40)
    for path, words in ((tmp_path, "is a folder"), (text, "is not a records file")):
        status, _, err = run("records", "list", "--records", str(path))
        assert status == 8
        assert words in err


def test_the_configuration_file_is_read_and_checked(run: Run, tmp_path: Path) -> None:
    good = tmp_path / "good.toml"
    good.write_text('box = "emu://film"\n[places]\nmine = "coupling@250V/1M"\n[thresholds]\naccept = 0.9\n')
    status, out, _ = run(
        "--config", str(good), "test", "47n 630V film", "--role", "mine", "--dwell", "10", "--yes", "--json"
    )
    assert (status, json.loads(out)["test_V"] < 260) == (0, True)
    for text, words in (
        ("bx = 1\n", "bx"),
        ("box = 1\n", "box"),
        ("[thresholds]\naccept = 2.0\n", "accept"),
        ("box = [", "toml"),
    ):
        wrong = tmp_path / "wrong.toml"
        wrong.write_text(text)
        status, _, err = run("--config", str(wrong), "box")
        assert status == 2
        assert words in err


def test_help_teaches(run: Run) -> None:
    for name in cli.COMMANDS:
        status, out, _ = run(name, "--help")
        assert status == 0
        assert "dwellbench " + name in out
    assert "Exit status" in run("--help")[1]


def test_without_a_command_it_says_what_there_is(run: Run) -> None:
    for arguments in ((), ("records",)):
        status, out, err = run(*arguments)
        assert (status, err) == (0, "")
        assert "Usage" in out
        assert "list" in out or "test" in out


def test_a_port_with_nothing_plugged_in_is_not_taken_for_the_box(
    run: Run, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("dwellbench.cli.reach.ports", lambda: [{"url": "/dev/ttyS0", "what": "n/a"}])
    status, _, err = run("box")
    assert status == 7
    assert "No box is connected" in err
    assert "emu://demo" in err
