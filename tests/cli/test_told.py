"""What people are told: words large enough, figures with their doubt, sentences while it runs, and while it is stopped."""

from __future__ import annotations

import io
import os
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from rich.console import Console
from tests.cli.test_commands import FILM_ARGS, OUTCOME, Run, run
from tests.helpers import OPEN, plan, ready, scenario

from dwellbench.cli import say
from dwellbench.cli.context import Options
from dwellbench.cli.large import _LETTERS, large
from dwellbench.cli.prompts import CAUTIONS
from dwellbench.cli.say import _NEXT, _UNFIT
from dwellbench.cli.teller import _SENTENCES, STOPPING, Teller
from dwellbench.cli.verdict import tell_outcome
from dwellbench.cli.view import View
from dwellbench.judging.say import with_doubt
from dwellbench.outcome import Outcome
from dwellbench.quantity import Quantity
from dwellbench.wire.codes import names

__all__ = ["run"]  # the fixture
WORDS = ("USE", "RE-FORM", "NOT SURE", *_UNFIT.values())


class Terminal(Options):
    """Options whose people sit at a terminal of so many columns."""

    def __init__(self, columns: int) -> None:
        super().__init__()
        self.shown = Console(file=io.StringIO(), force_terminal=True, width=columns, color_system=None)

    def console(self) -> Console:
        return self.shown

    def say(self, text: str = "") -> None:
        self.shown.print(text, markup=False)

    @property
    def text(self) -> str:
        file = self.shown.file
        assert isinstance(file, io.StringIO)
        return file.getvalue()


# ---- the word


@pytest.mark.parametrize("word", WORDS)
@pytest.mark.parametrize("width", [20, 60, 80, 120, 200])
def test_a_word_is_large_where_there_is_room_and_itself_where_there_is_none(word: str, width: int) -> None:
    rows = large(word, width)
    assert rows == [word] or (len(rows) == 5 and max(map(len, rows)) <= width)
    if width >= 80:
        assert len(rows) == 5
    assert large(word, 5) == [word]


def test_every_letter_is_five_rows_of_one_width_and_no_two_are_alike() -> None:
    for letter, rows in _LETTERS.items():
        assert len(rows) == 5
        assert len({len(row) for row in rows}) == 1, letter
    assert len(set(_LETTERS.values())) == len(_LETTERS)
    assert set("".join(WORDS)) == set(_LETTERS)
    assert large("WHY", 200) == ["WHY"]


@pytest.fixture(scope="module")
def outcome() -> Outcome:
    """That of a sound film, as the box gives it."""
    with ready("emu://film?seed=3") as box:
        return box.test("47n 630V film", "coupling@310V/470k", plan=plan(box, volts=310.0, dwell=10.0))


@pytest.mark.parametrize(
    ("verdict", "following", "word"),
    [
        ("fit", "use", "USE"),
        ("fit", "use_up_to", "USE"),
        ("fit", "check_esr", "USE"),
        ("unfit", "scrap", "SCRAP"),
        ("unfit", "other_place", "NOT HERE"),
        ("unfit", "clean_and_retest", "NOT SURE"),
        ("unfit", "re_form_then_test", "RE-FORM"),
        ("undecided", "re_form_then_test", "RE-FORM"),
        ("undecided", None, "NOT SURE"),
    ],
)
def test_the_word_is_what_the_hand_does_next(
    outcome: Outcome, verdict: str, following: str | None, word: str
) -> None:
    changed = replace(outcome, verdict=verdict, next=following)
    assert say.word(changed) == word
    terminal = Terminal(100)
    tell_outcome(terminal, changed)
    for row in large(word, 92):
        assert row in terminal.text
    assert say.next_words(changed) in terminal.text


def test_there_are_words_for_all_that_may_come_next() -> None:
    assert set(_NEXT) == set(OUTCOME["properties"]["next"]["enum"]) - {None}


# ---- figures


@pytest.mark.parametrize(
    ("value", "half", "words"),
    [
        (47.999e-9, 0.2213e-9, "48.00 \u00b1 0.22 nF"),
        (1.62e-9, 28e-12, "1.620 \u00b1 0.028 nF"),
        (100e-6, 25e-6, "100 \u00b1 25 uF"),
        (2.5, 0.0, "2 \u00b1 0 F"),
        (999.99e-9, 4e-9, "1000.0 \u00b1 4.0 nF"),
        (-3e-9, 1e-10, "-3.00 \u00b1 0.10 nF"),
        (1.0, 1e-12, "1.000000 \u00b1 0.000000 F"),
    ],
)
def test_value_and_doubt_share_a_unit_and_their_last_figure(value: float, half: float, words: str) -> None:
    assert with_doubt(value, half, "F") == words


@pytest.mark.parametrize(
    ("quantity", "words"),
    [
        (None, "not determined"),
        (Quantity.of(47e-9, 1e-10), "47.00 \u00b1 0.20 nF"),
        (Quantity(1e9, 4e8, 5e8, 4e9), "1 Gohm, between 500 Mohm and 4 Gohm"),
        (Quantity.above(5.12e11), "above 512 Gohm"),
        (Quantity.below(3e-9), "below 3 n"),
    ],
)
def test_a_quantity_is_said_with_its_doubt(quantity: Quantity | None, words: str) -> None:
    assert say.quantity(quantity, "F" if "F" in words else "ohm").startswith(words)


# ---- while it runs


def test_every_stage_has_its_sentences() -> None:
    assert set(_SENTENCES) >= {name for name in names("stages") if name != "form"}


def test_the_sentences_of_a_run_say_volts_hands_time_and_what_comes(tmp_path: Path) -> None:
    told = []
    with ready("emu://film?seed=3") as box:
        run = box.start(plan(box, dwell=5.0))
        teller = Teller(run.plan, run.estimate_s)
        for notice in run:
            teller.take(notice, run)
            told.append(teller.told())
    charged = [one for one in told if one.on_part.startswith("40")]
    assert charged
    assert all("hands off" in one.on_part for one in charged)
    assert any("s of holding left" in one.left and "Holding at 400 V." in one.doing for one in charged)
    assert "proven" in told[-1].on_part
    assert "shorting wire" in told[-1].following
    assert not any("proven" in one.on_part and "not proven" not in one.on_part for one in told[:-3])


def test_the_live_view_shows_the_sentences(tmp_path: Path) -> None:
    terminal = Terminal(100)
    with ready("emu://film?seed=3") as box, View(terminal, "47n 630V film") as view:
        box.test("47n 630V film", plan=plan(box), watcher=view)
    assert "hands off" in terminal.text
    assert "Holding at 400 V." in terminal.text


def test_cautions_come_before_anything_is_energised_and_once(run: Run) -> None:
    for arguments in (FILM_ARGS, (*FILM_ARGS, "--json")):
        _, out, err = run("--box", "emu://film", *arguments)
        said = err if "--json" in arguments else out
        assert said.count(CAUTIONS[0]) == 1
        assert said.index(CAUTIONS[0]) < said.index("the box has begun")


def test_an_open_lead_is_to_be_clipped_again_before_it_is_thrown_away(run: Run, tmp_path: Path) -> None:
    status, out, _ = run("--box", scenario(tmp_path, OPEN), *FILM_ARGS)
    assert status == 3
    assert "NOT SURE  -  clean" in out


# ---- at a real terminal

MAIN = "import os; os.login_tty(0); from dwellbench.cli.main import main; main()"


class AtTerminal:
    """The command with a pseudo-terminal of its own, as a person has it."""

    def __init__(self, folder: Path, *arguments: str) -> None:
        self.keyboard, slave = os.openpty()
        environment = {
            **os.environ,
            "PYTHONPATH": os.pathsep.join(sys.path),
            "DWELLBENCH_RECORDS": str(folder / "records.db"),
            "XDG_CONFIG_HOME": str(folder),
            "TERM": "xterm",
            "COLUMNS": "100",
        }
        self.process = subprocess.Popen(
            [sys.executable, "-c", MAIN, *arguments],
            env=environment,
            stdin=slave,
            stdout=slave,
            stderr=slave,
        )
        os.close(slave)
        self.text = ""

    def until(self, words: str) -> None:
        """Read until the words have been shown."""
        while words not in self.text:
            assert self._read(), self.text

    def end(self) -> int:
        """Read to the end and return the status."""
        while self._read():
            pass
        return self.process.wait(timeout=20)

    def _read(self) -> bool:
        try:
            came = os.read(self.keyboard, 4096)
        except OSError:  # the other side has closed
            return False
        self.text += came.decode()
        return bool(came)

    def press(self, keys: bytes) -> None:
        """Type."""
        os.write(self.keyboard, keys)


@pytest.fixture
def at_terminal(tmp_path: Path) -> Iterator[Any]:
    """Start a command at a terminal."""
    begun: list[AtTerminal] = []

    def begin(*arguments: str) -> AtTerminal:
        begun.append(AtTerminal(tmp_path, *arguments))
        return begun[-1]

    yield begin
    for one in begun:
        one.process.kill()
        one.process.wait(timeout=20)
        os.close(one.keyboard)


@pytest.mark.skipif(sys.platform == "win32", reason="pseudo-terminals")
def test_ctrl_c_is_answered_with_what_is_going_on_until_the_part_is_safe(at_terminal: Any) -> None:
    person = at_terminal("--box", "emu://film", "test", "47n 630V film", "--dwell", "3000")
    person.until("Then press Enter")
    assert CAUTIONS[0][:40] in person.text
    person.press(b"\n")
    person.until("of holding left")
    person.press(b"\x03")
    assert person.end() == 130
    assert STOPPING[:40] in person.text
    assert person.text.rstrip().endswith("the part is discharged.")
