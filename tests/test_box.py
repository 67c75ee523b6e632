"""One box over the real wire: the real firmware on an emulated box, from hello to the end of a run."""

from __future__ import annotations

import json
import os
import threading
import time
from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path
from typing import Any

import pytest
from tests.helpers import FILM, OPEN, SHORT, fault, plan, ready, scenario, truth

from dwellbench.bench import Bench, open_box
from dwellbench.emulator.opening import Opening
from dwellbench.emulator.outlet_pty import Pty
from dwellbench.emulator.serve import serve
from dwellbench.errors import (
    LinkError,
    NoBoxError,
    RefusedError,
    UsageError,
    WrongBoxError,
)
from dwellbench.wire.core import seal
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
def test_something_that_is_not_a_box(
    answer: bytes, error: type[LinkError], monkeypatch: pytest.MonkeyPatch
) -> None:
    if answer:
        monkeypatch.setattr("dwellbench.wire.conversation.HELLO_S", 1.1)
    peer = Peer(answer)
    try:
        with pytest.raises(error) as caught:
            open_box(peer.name)
        assert caught.value.exit == 7
    finally:
        peer.close()


def hello(**changes: object) -> bytes:
    """What a peer answers that says all is well, whatever is asked: the first request of a host has id 1."""
    result = {"protocol": [1, 0], "firmware": "0", "build": "0" * 8, "model": "m", "box": "0" * 16, **changes}
    return seal({"jsonrpc": "2.0", "result": result, "id": 1})


@pytest.mark.parametrize("members", [{}, {"ratings": "other than ours", "box": None}])
def test_another_major_version_is_refused_whatever_else_it_says(members: dict[str, object]) -> None:
    peer = Peer(hello(protocol=[2, 7], **members))
    try:
        with pytest.raises(WrongBoxError, match="version 2 of the wire, this host version 1"):
            open_box(peer.name)
    finally:
        peer.close()


@pytest.mark.parametrize("speed", [0.5, 20.0])
def test_signs_of_life_go_out_by_the_box_s_own_time(tmp_path: Path, speed: float) -> None:
    """Two of its seconds without one end a run, whatever its pace."""
    outlet, over = Pty(tmp_path / "bench"), threading.Event()
    served = Opening.from_url("emu://film?seed=3").make(time_scale=speed)
    server = threading.Thread(target=serve, args=(served, outlet, speed, over.is_set))
    server.start()
    try:
        with open_box(str(tmp_path / "bench"), wire_log=tmp_path / "log") as box:
            box.keepalive = True
            begin, wall = box.clock(), time.monotonic()
            box.rest(1.2)
            assert box.clock() - begin == pytest.approx((time.monotonic() - wall) * speed, rel=0.1)
    finally:
        over.set()
        server.join(10)
    signs = [at for at, way, line in read_log(tmp_path / "log") if way == ">" and b"keepalive" in line]
    assert len(signs) >= 2
    assert max(later - one for one, later in pairwise(signs)) < 0.6 + 0.02 * speed


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
    numbers = [notice.n for notice in run]
    assert run.end == "complete"
    assert numbers == list(range(numbers[0], numbers[0] + len(numbers)))
    assert run.rows[0][1] < 200


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


def test_an_event_that_never_comes_whole_is_lost_alone(film: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    """A firmware that sent what the schema does not allow: the host goes on without that one event."""
    from dwellbench.wire.core import Junk

    receive = film._client.receive

    def spoilt(data: bytes) -> list[Any]:
        return [Junk(b"", "spoilt") if getattr(one, "n", None) == 40 else one for one in receive(data)]

    monkeypatch.setattr(film._client, "receive", spoilt)
    run = film.start(plan(film))
    numbers = [notice.n for notice in run]
    assert (run.end, film.lost) == ("complete", 1)
    assert 40 not in numbers
    assert len(numbers) == numbers[-1] - numbers[0]
