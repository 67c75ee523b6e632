"""Stopping a run: only after proven discharge, and nothing that was measured is dropped, wherever the interrupt falls."""

from __future__ import annotations

import signal
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType
from typing import Any

import pytest
from tests.helpers import FILM, FILM_1U, fault, plan, ready, scenario, truth

from dwellbench.bench import Bench
from dwellbench.errors import FaultError, StoppedError
from dwellbench.records import Store

pytestmark = pytest.mark.skipif(not hasattr(signal, "setitimer"), reason="needs interval timers")


@pytest.fixture
def film(tmp_path: Path) -> Iterator[Bench]:
    with ready(scenario(tmp_path, FILM) + "?seed=5") as box:
        yield box


@contextmanager
def ctrl_c(*after_s: float) -> Iterator[None]:
    """Real SIGINTs, so many wall seconds after one another; what comes too late does not come."""
    left = list(after_s[1:])

    def press(number: int, frame: FrameType | None) -> None:
        if left:
            signal.setitimer(signal.ITIMER_REAL, left.pop(0))
        signal.raise_signal(signal.SIGINT)

    before = signal.signal(signal.SIGALRM, press)
    signal.setitimer(signal.ITIMER_REAL, after_s[0])
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        signal.signal(signal.SIGALRM, before)


class Watch:
    """Notes what it is shown."""

    def __init__(self) -> None:
        self.run: Any = None

    def began(self, plan: object, run: Any) -> None:
        self.run = run

    def happened(self, notice: object, run: Any) -> None:
        """Nothing to do."""


@pytest.mark.parametrize("after_s", [0.005 + 0.02 * step for step in range(12)])
def test_wherever_the_interrupt_falls_the_part_is_discharged_and_the_record_is_whole(
    film: Bench, tmp_path: Path, after_s: float
) -> None:
    watch = Watch()
    with Store(tmp_path / "r.db") as store:
        with pytest.raises((StoppedError, KeyboardInterrupt)) as caught, ctrl_c(after_s):
            film.test("47n 630V film", store=store, plan=plan(film, dwell=600.0), watcher=watch)
        left = store.records()
        record = store.record(left[0].id) if left else {}
        kept = store.samples(left[0].id).tolist() if left else []
    assert abs(truth(film).part_V) < 30
    assert film.status()["state"] == "rest"
    if isinstance(caught.value, KeyboardInterrupt):
        assert film.status()["run"] == 0  # it had not come to asking for a run
        return
    assert (record["state"], record["why"]) == ("interrupted", "stopped by the user")
    if watch.run is not None:
        assert kept == watch.run.rows
        numbers = sorted([row[0] for row in kept] + [event["n"] for event in record["events"]])
        assert numbers == list(range(numbers[0], numbers[0] + len(numbers)))
        assert [event["end"] for event in record["events"] if event["kind"] == "done"] == ["aborted"]


def test_what_was_measured_comes_with_the_error(film: Bench) -> None:
    with pytest.raises(StoppedError) as caught, ctrl_c(0.2):
        film.run(plan(film, dwell=600.0))
    assert caught.value.exit == 130
    assert caught.value.details["proven"] is True
    assert len(caught.value.measured) > 10
    assert caught.value.measured.info["end"] == "aborted"


def test_who_iterates_himself_gets_every_event_and_then_the_error(film: Bench) -> None:
    run = film.start(plan(film, dwell=600.0))
    seen = []
    with pytest.raises(StoppedError), ctrl_c(0.15):
        for notice in run:
            seen.append(notice.n)
    rest = [notice.n for notice in run.unseen()]
    both = sorted({*seen, *rest})
    assert both == list(range(both[0], both[0] + len(both)))
    assert (run.end, run.proven, run.over) == ("aborted", True, True)
    assert run.unseen() == []


def test_a_second_interrupt_does_not_wait_and_says_what_the_box_goes_on_to_do(film: Bench) -> None:
    run = film.start(plan(film, dwell=600.0))
    original, presses = film.next_event, []

    def pressed(timeout_s: float, take: Any) -> bool:
        if run.state == "dwell" or presses:
            presses.append(1)
            if len(presses) <= 2:
                raise KeyboardInterrupt
        return original(timeout_s, take)

    film.next_event = pressed  # type: ignore[method-assign]
    with pytest.raises(StoppedError) as caught:
        list(run)
    assert caught.value.details["proven"] is False
    assert "keeps the lid locked" in caught.value.remedy
    film.keepalive = False
    film._link.pause(40)
    assert abs(truth(film).part_V) < 30
    assert film.status()["state"] == "rest"


def test_a_stop_that_leaves_charge_unaccounted_for_does_not_call_the_part_discharged(tmp_path: Path) -> None:
    """A lead that has let go keeps its charge where no bleed reaches it; the user may be about to open the lid."""
    url = scenario(tmp_path, FILM_1U, extra=fault("part_opens", 12.0)) + "?seed=5"
    with ready(url) as box:
        run = box.start(plan(box, "1uF 630V film", dwell=600.0))
        with pytest.raises(FaultError) as caught:
            for _ in run:
                if run.rows and run.rows[-1][1] > 15_000:
                    run.stop()
                    raise run.stopped()
        assert caught.value.details["fault"] in ("charge_left", "bleed_slow")
        assert "Treat the part as charged" in caught.value.remedy


def test_an_interrupt_while_the_box_is_asked_to_run_stops_what_may_have_begun(
    film: Bench, monkeypatch: pytest.MonkeyPatch
) -> None:
    asked = plan(film, dwell=600.0)
    monkeypatch.setattr(film, "ask", _then(film.ask, "run", monkeypatch, film))
    with pytest.raises(StoppedError):
        film.start(asked)
    status = film.status()
    assert (status["state"], status["run_key"]) == ("rest", asked.run_key)
    assert abs(truth(film).part_V) < 30


def _then(ask: Any, method: str, monkeypatch: pytest.MonkeyPatch, box: Bench) -> Any:
    """Ask, and be interrupted when the answer to `method` has come."""

    def asked(what: str, params: Any = None) -> Any:
        answer = ask(what, params)
        if what == method:
            monkeypatch.setattr(box, "ask", ask)
            raise KeyboardInterrupt
        return answer

    return asked


def test_pressing_keys_for_long_does_not_hang(film: Bench) -> None:
    begin = time.monotonic()
    run = film.start(plan(film, dwell=600.0))
    with pytest.raises(StoppedError), ctrl_c(0.1, *[0.01] * 50):
        list(run)
    assert time.monotonic() - begin < 20
