"""One box over the real wire: the real firmware on an emulated box, faults and lost links included."""

from __future__ import annotations

import json
import os
import threading
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from tests.helpers import FILM, FILM_1U, OPEN, SHORT, fault, plan, ready, scenario, truth, world

from dwellbench.bench import Bench, open_box
from dwellbench.errors import (
    FaultError,
    LinkError,
    NoBoxError,
    RefusedError,
    StoppedError,
    UsageError,
    WrongBoxError,
)
from dwellbench.wire.wire_log import read_log


@pytest.fixture
def film(tmp_path: Path) -> Iterator[Bench]:
    with ready(scenario(tmp_path, FILM) + "?seed=5") as box:
        yield box


# ---- who is there


def test_it_says_who_it_is(film: Bench) -> None:
    assert film.identity.model == "reference"
    assert film.identity.simulated
    assert film.ratings.volts_V == 650.0
    assert len(film.identity.box) == 16


def test_a_box_just_switched_on_proves_discharge_and_comes_to_rest(tmp_path: Path) -> None:
    with open_box("emu://charged?seed=2") as box:
        assert box.status()["state"] == "waking"
        status = box.settle()
        assert status["safe"]
        assert abs(truth(box).part_V) < 30
        assert not truth(box).hurt


def test_nothing_there() -> None:
    with pytest.raises(NoBoxError) as caught:
        open_box("/dev/there-is-no-such-port")
    assert caught.value.exit == 7
    assert caught.value.remedy


@pytest.mark.parametrize(
    "url", ["nonsense://x", "emu://film?sed=1", "emu://film?seed=x", "emu://no-such-scenario"]
)
def test_a_url_that_is_none(url: str) -> None:
    with pytest.raises(UsageError) as caught:
        open_box(url)
    assert caught.value.remedy


class Peer:
    """A pseudo-terminal with something else behind it."""

    def __init__(self, answer: bytes) -> None:
        import tty

        self.master, self.slave = os.openpty()
        tty.setraw(self.slave)
        self.name = os.ttyname(self.slave)
        self._answer = answer
        self._thread = threading.Thread(target=self._serve, daemon=True)
        self._thread.start()

    def _serve(self) -> None:
        while True:
            try:
                if not os.read(self.master, 1024):
                    return
                if self._answer:
                    os.write(self.master, self._answer)
            except OSError:
                return

    def close(self) -> None:
        os.close(self.slave)
        os.close(self.master)


@pytest.mark.parametrize(
    ("answer", "error"),
    [
        (b"", NoBoxError),
        (b"login: \n", WrongBoxError),
        (b'{"jsonrpc":"2.0","error":{"code":-32601,"message":"Method not found"},"id":1}\n', WrongBoxError),
        (b"\xff\x00\n" * 400, WrongBoxError),
    ],
)
def test_something_that_is_not_a_box(answer: bytes, error: type[LinkError]) -> None:
    peer = Peer(answer)
    try:
        with pytest.raises(error) as caught:
            open_box(peer.name)
        assert caught.value.exit == 7
    finally:
        peer.close()


def test_another_major_version_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from dwellbench.wire import conversation as box_module

    monkeypatch.setattr(box_module, "MAJOR", 2)
    with pytest.raises(WrongBoxError, match="version 1 of the wire"):
        open_box("emu://film")


# ---- running


def test_a_run_to_its_end_gives_every_event_once(film: Bench) -> None:
    run = film.start(plan(film))
    numbers = [notice.n for notice in run]
    assert numbers == list(range(numbers[0], numbers[0] + len(numbers)))
    assert (run.end, run.fault, run.proven, film.lost) == ("complete", None, True, 0)
    assert abs(truth(film).part_V) < 1
    assert film.status()["state"] == "rest"


@pytest.mark.parametrize(("body", "end"), [(SHORT, "short"), (OPEN, "open")])
def test_a_part_that_never_takes_charge_ends_in_order_and_not_in_lockout(
    tmp_path: Path, body: str, end: str
) -> None:
    with ready(scenario(tmp_path, body) + "?seed=5") as box:
        run = box.start(plan(box))
        list(run)
        assert (run.end, run.fault) == (end, None)
        assert box.status()["state"] == "rest"


def test_the_same_seed_gives_the_same_bytes(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM) + "?seed=11"
    logs = []
    for name in ("a", "b"):
        with open_box(url, wire_log=tmp_path / name) as box:
            box.settle()
            fixed = plan(box)
            run = box.start(type(fixed)(**{**fixed.__dict__, "run_key": "same"}))
            list(run)
        logs.append((tmp_path / name).read_bytes())
    assert logs[0] == logs[1]
    assert len(read_log(tmp_path / "a")) > 100


def test_micropython_gives_the_same_bytes_and_the_same_verdict(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM) + "?seed=11&interpreter="
    seen = []
    for interpreter in ("cpython", "micropython"):
        log = tmp_path / f"{interpreter}.log"
        with open_box(url + interpreter, wire_log=log) as box:
            box.settle()
            fixed = plan(box, dwell=10.0)
            outcome = box.test(
                "47n 630V film",
                "coupling@310V/470k",
                plan=type(fixed)(**{**fixed.__dict__, "run_key": "same"}),
            )
        seen.append((outcome.verdict, outcome.reason, log.read_bytes()))
    assert seen[0] == seen[1]


def test_a_run_asked_for_twice_with_one_key_is_one_run(film: Bench) -> None:
    asked = plan(film)
    run = film.start(asked)
    again = film.ask("run", asked.to_wire())
    assert again["run"] == run.number
    list(run)
    assert film.ask("run", asked.to_wire())["run"] == run.number
    assert film.status()["state"] == "rest"


def test_finish_ends_the_dwell_early_in_order(film: Bench) -> None:
    run = film.start(plan(film, dwell=300.0))
    for notice in run:
        if notice.method == "state" and notice.params["state"] == "dwell":
            film.rest(2.0)
            film.finish()
    assert run.end == "finished"


# ---- refusals in words


def test_a_lid_left_open_is_refused_with_what_to_do(tmp_path: Path) -> None:
    with ready(scenario(tmp_path, FILM, extra=fault("lid_open", 1.0, run=0)) + "?seed=5") as box:
        with pytest.raises(RefusedError) as caught:
            box.start(plan(box))
        assert caught.value.details["reason"] == "lid"
        assert "lid" in caught.value.message
        assert caught.value.exit == 5


def test_beyond_the_rating_is_refused_by_the_box_itself(film: Bench) -> None:
    wire = {**plan(film).to_wire(), "volts_mv": 700_000}
    with pytest.raises(RefusedError) as caught:
        film.ask("run", wire)
    assert caught.value.details["reason"] == "beyond_rating"
    energetic = {**plan(film).to_wire(), "volts_mv": 600_000, "expect_pf": 470_000_000}
    with pytest.raises(RefusedError, match="energy"):
        film.ask("run", energetic)


def test_a_second_run_while_one_is_under_way_is_refused(film: Bench) -> None:
    run = film.start(plan(film))
    with pytest.raises(RefusedError, match="under way"):
        film.start(plan(film))
    list(run)


# ---- stopping


def test_ctrl_c_stops_only_after_proven_discharge(film: Bench) -> None:
    run = film.start(plan(film, dwell=60.0))
    with pytest.raises(StoppedError) as caught:
        for notice in _interrupt_at(run, "dwell"):
            assert notice
    assert caught.value.exit == 130
    assert run.end == "aborted"
    assert run.proven
    assert abs(truth(film).part_V) < 30
    assert [notice.method for notice in run.unseen()].count("done") == 1


def _interrupt_at(run: Any, state: str) -> Iterator[Any]:
    """Iterate a run; the keyboard interrupts it in `state`, in the middle of waiting."""
    original = run._box.next_event
    fired = []

    def interrupted(timeout_s: float) -> Any:
        if run.state == state and not fired:
            fired.append(True)
            raise KeyboardInterrupt
        return original(timeout_s)

    run._box.next_event = interrupted
    yield from run


# ---- a lost link


class Cable:
    """Stands between a link and its port; may be pulled for some virtual seconds, losing what is under way."""

    def __init__(self, box: Bench) -> None:
        self.link = box._link
        self.port = box._link._port
        self.pulled = False

    def pull(self) -> None:
        self.pulled = True
        self.port.box.link.drop()
        self.port.box.link.attach(False)

    def put_back(self) -> None:
        self.pulled = False
        self.port.box.link.attach(True)


@pytest.mark.parametrize("gone_s", [0.4, 0.9, 1.4])
def test_a_link_cut_in_mid_run_and_restored_loses_no_sample(
    film: Bench, monkeypatch: pytest.MonkeyPatch, gone_s: float
) -> None:
    cable = Cable(film)
    read, write = cable.link.read, cable.link.write

    def cut_read(timeout_s: float) -> bytes:
        if cable.pulled:
            raise LinkError("pulled")
        return read(timeout_s)

    def cut_write(data: bytes) -> None:
        if cable.pulled:
            raise LinkError("pulled")
        write(data)

    def reopened() -> Any:
        if cable.pulled:
            cable.port.wait(gone_s)
            cable.put_back()
            raise NoBoxError("still gone")
        monkeypatch.setattr("dwellbench.wire.conversation.open_link", lambda url, log: cable.link)
        return original()

    original = film._reopened
    monkeypatch.setattr(cable.link, "read", cut_read)
    monkeypatch.setattr(cable.link, "write", cut_write)
    monkeypatch.setattr(cable.link, "close", lambda: None)
    monkeypatch.setattr(film, "_reopened", reopened)
    monkeypatch.setattr(film, "_pause", lambda seconds: None)
    run = film.start(plan(film, dwell=8.0))
    numbers = []
    for notice in run:
        numbers.append(notice.n)
        if len(numbers) in (60, 130):
            cable.pull()
    assert (run.end, film.lost) == ("complete", 0)
    assert numbers == list(range(numbers[0], numbers[0] + len(numbers)))


@pytest.mark.parametrize(("body", "marking"), [(FILM, "47n 630V film"), (FILM_1U, "1uF 630V film")])
def test_a_host_that_goes_silent_leaves_a_discharged_part_within_two_and_a_half_seconds(
    tmp_path: Path, body: str, marking: str
) -> None:
    with ready(scenario(tmp_path, body) + "?seed=5") as box:
        run = box.start(plan(box, marking, dwell=60.0))
        for notice in run:
            if notice.method == "state" and notice.params["state"] == "dwell":
                break
        box.rest(3.0)
        box.keepalive = False
        assert truth(box).part_V > 350
        begin = box.clock()
        while truth(box).part_V > 30 and box.clock() - begin < 10:
            world(box)
            box._link._port.wait(0.005)
        assert box.clock() - begin <= 2.5
        box._link._port.wait(20)
        assert box.status()["state"] == "rest"
        list(run)
        assert run.end == "link_lost"


# ---- faults


def test_the_lid_opened_in_a_run_locks_out_until_acknowledged(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM_1U, extra=fault("lid_open", 10.0, for_s=4.0)) + "?seed=5"
    with ready(url) as box:
        run = box.start(plan(box, "1uF 630V film", dwell=20.0))
        list(run)
        assert run.end == "fault"
        assert run.fault == "lid_open"
        assert run.proven
        with pytest.raises(FaultError) as caught:
            box.start(plan(box))
        assert caught.value.exit == 6
        box.wait_for(lambda now: now["lid"] == "closed", 60.0)
        box.acknowledge()
        assert box.status()["state"] == "rest"
        assert not truth(box).hurt


@pytest.mark.parametrize("kind", ["controller_reset", "controller_hung"])
def test_a_controller_that_is_reset_in_a_run_says_so_and_is_safe(tmp_path: Path, kind: str) -> None:
    url = scenario(tmp_path, FILM_1U, extra=fault(kind, 10.0, for_s=5.0)) + "?seed=5"
    with ready(url) as box:
        run = box.start(plan(box, "1uF 630V film", dwell=20.0))
        with pytest.raises(FaultError, match="restarted"):
            list(run)
        box._link._port.wait(40)
        status = box.status()
        assert (status["state"], status["fault"]) == ("lockout", "reset_in_run")
        with pytest.raises(RefusedError, match="not accounted for") as caught:
            box.acknowledge()
        assert "--shorted" in caught.value.remedy
        box.acknowledge(shorted=True)
        assert box.status()["state"] == "rest"
        assert abs(truth(box).part_V) < 30
        assert not truth(box).hurt


# ---- what the box keeps


def test_calibration_is_read_in_pages(film: Bench) -> None:
    calibration = film.calibration()
    assert calibration is not None
    assert calibration == json.loads(film.pages("calibration"))
    assert calibration["box"] == film.identity.box
    assert len(calibration["amps"]) == 6


def test_a_state_file_keeps_the_box_between_openings(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM, FILM) + f"?seed=5&state={tmp_path / 'kept.json'}"
    with ready(url) as box:
        list(box.start(plan(box)))
        boot, now_s = box.identity.boot, box.clock()
    with ready(url) as box:
        assert box.identity.boot == boot + 1
        assert box.clock() > now_s


@pytest.mark.parametrize("at_s", [1.0, 2.5, 5.0, 7.0, 9.0])
@pytest.mark.parametrize(("body", "marking"), [(FILM, "47n 630V film"), (FILM_1U, "1uF 630V film")])
def test_a_charge_relay_that_dies_is_a_fault_whenever_it_dies(
    tmp_path: Path, body: str, marking: str, at_s: float
) -> None:
    with ready(scenario(tmp_path, body, extra=fault("charge_relay_dead", at_s)) + "?seed=5") as box:
        run = box.start(plan(box, marking, dwell=10.0))
        list(run)
        assert run.fault in ("way_down", "divider", "no_rise", "second_bleed")
        assert not truth(box).hurt


def test_an_event_that_never_comes_whole_is_lost_alone(film: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    """A firmware that sent what the schema does not allow: the host goes on without that one event."""
    from dwellbench.wire.core import Junk

    receive = film._client.receive

    def spoilt(data: bytes) -> list[Any]:
        return [Junk(b"", "spoilt") if getattr(one, "n", None) == 40 else one for one in receive(data)]

    monkeypatch.setattr(film._client, "receive", spoilt)
    monkeypatch.setattr("dwellbench.wire.core.Notice.n", property(lambda self: int(self.params["n"])))
    run = film.start(plan(film))
    numbers = [notice.n for notice in run]
    assert (run.end, film.lost) == ("complete", 1)
    assert 40 not in numbers
    assert len(numbers) == numbers[-1] - numbers[0]
