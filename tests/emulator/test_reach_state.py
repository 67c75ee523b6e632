"""The file that keeps an emulated box between openings: what lives on, what a killed program leaves, and who may use it."""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
import serial
from tests.helpers import FILM, FILM_1U, fault, plan, ready, scenario, truth, world

from dwellbench.bench import Bench, open_box
from dwellbench.emulator.opening import Opening
from dwellbench.errors import FaultError, NoBoxError, UsageError


@pytest.fixture
def url(tmp_path: Path) -> str:
    """A box of two parts with its file."""
    return scenario(tmp_path, FILM_1U, FILM) + f"?seed=5&state={tmp_path / 'kept.json'}"


def flash(box: Bench) -> dict[str, bytes]:
    return dict(box._link._port.box.flash)


def test_flash_position_and_time_live_on(url: str) -> None:
    with ready(url) as box:
        list(box.start(plan(box, "1uF 630V film")))
        box.rest(60.0)
        assert truth(box).part_label == "P2", "the operator has fitted the next one"
        kept, now_s, lid = flash(box), box.clock(), truth(box).lid_open
    with open_box(url) as box:
        assert box.clock() >= now_s
        assert (truth(box).part_label, truth(box).lid_open, truth(box).runs) == ("P2", lid, 1)
        assert {**flash(box), "boot": b""} == {**kept, "boot": b""}
        box.settle()
        run = box.start(plan(box))
        list(run)
        assert run.end == "complete"


def test_a_latched_reason_lives_on_until_acknowledged(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM_1U, extra=fault("stop_pressed", 6.0, for_s=0.5)) + "?seed=5"
    url += f"&state={tmp_path / 'kept.json'}"
    with ready(url) as box:
        list(box.start(plan(box, "1uF 630V film")))
    with open_box(url) as box:
        with pytest.raises(FaultError):
            box.settle()
        assert box.status()["fault"] == "stop"
        assert box.wait_for(lambda now: bool(now["safe"]), 60.0)
        box.acknowledge()
        assert box.status()["state"] == "rest"
    with ready(url) as box:
        assert box.status()["fault"] is None


def test_a_host_that_closes_in_mid_run_leaves_a_box_that_ends_it_by_itself(url: str) -> None:
    with ready(url) as box:
        run = box.start(plan(box, "1uF 630V film", dwell=60.0))
        for notice in run:
            if notice.method == "state" and notice.params["state"] == "dwell":
                break
        box._link.close()  # without a word, as a program that crashes
        assert abs(truth(box).part_V) < 1
        assert not truth(box).supply_on
    with ready(url) as box:
        assert box.status()["fault"] is None
        assert not truth(box).hurt


def test_of_a_killed_program_no_more_is_lost_than_of_a_board_whose_plug_was_pulled(
    url: str, tmp_path: Path
) -> None:
    with ready(url) as box:
        run = box.start(plan(box, "1uF 630V film", dwell=60.0))
        next(iter(run))
        shutil.copy(tmp_path / "kept.json", tmp_path / "killed.json")  # as the file is while the run goes on
    with open_box(url.replace("kept.json", "killed.json")) as box:
        with pytest.raises(FaultError):
            box.settle()
        assert box.status()["fault"] == "reset_in_run"
        assert world(box).runs == 1


def test_the_box_may_go_on_under_the_other_interpreter(url: str) -> None:
    boots = []
    for interpreter in ("micropython", "cpython", "micropython"):
        with ready(f"{url}&interpreter={interpreter}") as box:
            boots.append(box.identity.boot)
    assert boots == [1, 2, 3]


# ---- who may use it


def test_one_program_at_a_time(url: str, tmp_path: Path) -> None:
    with open_box(url):
        with pytest.raises(NoBoxError, match="in use by another program") as caught:
            open_box(url)
        assert caught.value.exit == 7
    assert {path.name for path in tmp_path.iterdir()} == {"scenario0.toml", "kept.json"}
    with open_box(url):
        pass


HOLD = """
import sys
from dwellbench.emulator.opening import Opening
box = Opening.from_url(sys.argv[1]).make()
box.tick()
print("held", flush=True)
sys.stdin.read()
"""


def test_a_killed_program_leaves_it_free(url: str) -> None:
    held = subprocess.Popen(
        [sys.executable, "-c", HOLD, url],
        env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
    )
    with held:
        assert held.stdout is not None
        assert held.stdout.readline() == b"held\n"
        with pytest.raises(NoBoxError, match="in use"):
            Opening.from_url(url).make()
        held.send_signal(signal.SIGKILL)
    with open_box(url) as box:
        assert box.identity.boot == 2, "the start was counted in flash, and so in the file"


# ---- what is not such a file


def refused(url: str) -> str:
    with pytest.raises(UsageError) as caught:
        Opening.from_url(url).make()
    assert caught.value.remedy
    return caught.value.message


def kept(url: str, tmp_path: Path) -> dict[str, Any]:
    serial.serial_for_url(url).close()
    found: dict[str, Any] = json.loads((tmp_path / "kept.json").read_text(encoding="utf-8"))
    return found


@pytest.mark.parametrize(
    "text", ["", "{", "[]", "null", "{}", '{"schema":1}', "\x00", '"kept"'], ids=range(8)
)
def test_rubbish_is_refused_and_stays_as_it_is(url: str, tmp_path: Path, text: str) -> None:
    (tmp_path / "kept.json").write_text(text, encoding="utf-8")
    assert "does not keep this emulated box" in refused(url)
    assert (tmp_path / "kept.json").read_text(encoding="utf-8") == text
    assert not (tmp_path / "kept.json.lock").exists()


def test_every_part_of_it_is_needed(url: str, tmp_path: Path) -> None:
    whole = kept(url, tmp_path)
    for name in whole:
        (tmp_path / "kept.json").write_text(json.dumps({**whole, name: None}), encoding="utf-8")
        assert "does not keep this emulated box" in refused(url), name


def test_another_seed_another_scenario_another_version(url: str, tmp_path: Path) -> None:
    whole = kept(url, tmp_path)
    assert "another seed" in refused(url.replace("seed=5", "seed=6"))
    other = scenario(tmp_path, FILM).removeprefix("emu://")
    assert "another scenario" in refused(f"emu://{other}?seed=5&state={tmp_path / 'kept.json'}")
    (tmp_path / "kept.json").write_text(json.dumps({**whole, "schema": 2}), encoding="utf-8")
    assert "another version" in refused(url)


def test_a_folder_that_is_not_there_or_a_file_that_is_a_folder(url: str, tmp_path: Path) -> None:
    assert "cannot be written" in refused(url.replace("kept.json", "no/such/folder.json"))
    (tmp_path / "kept.json").mkdir()
    assert "does not keep" in refused(url)


@pytest.mark.parametrize(
    ("query", "words"),
    [
        ("state=", "needs a file"),
        ("seed=", "whole number"),
        ("seed=-1", "whole number"),
        ("seed=1e3", "whole number"),
        ("seed=99999999999999999999", "whole number"),
        ("seed=1&seed=2", "said twice"),
        ("speed=2", "'speed' is not known"),
        ("interpreter=python2", "no interpreter 'python2'"),
    ],
)
def test_urls_that_say_something_else(query: str, words: str) -> None:
    assert words in refused(f"emu://film?{query}")
