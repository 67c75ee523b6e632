"""Links that break or fall silent in a run: nothing that the box measured is lost, and no wait is without end."""

from __future__ import annotations

import contextlib
import socket
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from tests.cable import Cable
from tests.helpers import FILM, FILM_1U, fault, plan, ready, scenario, truth, world

from dwellbench.bench import Bench, open_box
from dwellbench.emulator.opening import Opening
from dwellbench.emulator.outlet_tcp import Tcp
from dwellbench.emulator.serve import serve
from dwellbench.errors import FaultError, LinkError, WrongBoxError
from dwellbench.records import Store
from dwellbench.wire.conversation import RECONNECT_S


@pytest.fixture
def cable(tmp_path: Path) -> Iterator[Cable]:
    cable = Cable(scenario(tmp_path, FILM) + "?seed=5")
    yield cable
    cable.port.close()


@pytest.fixture
def film(cable: Cable) -> Iterator[Bench]:
    with cable.bench() as box:
        box.settle()
        yield box


def whole(numbers: list[int]) -> bool:
    return numbers == list(range(numbers[0], numbers[0] + len(numbers)))


@pytest.mark.parametrize("gone_s", [0.0, 0.4, 0.9, 1.4])
def test_a_link_cut_and_restored_in_time_loses_no_sample_and_does_not_end_the_run(
    film: Bench, cable: Cable, gone_s: float
) -> None:
    run = film.start(plan(film, dwell=8.0))
    numbers = []
    for notice in run:
        numbers.append(notice.n)
        if len(numbers) in (20, 60, 130):
            cable.pull(gone_s)
    assert (run.end, film.lost, whole(numbers)) == ("complete", 0, True)
    assert cable.opened == 4


@pytest.mark.parametrize("gone_s", [2.5, 12.0, 28.0])
def test_a_link_gone_for_longer_brings_all_that_the_box_kept(
    film: Bench, cable: Cable, gone_s: float
) -> None:
    run = film.start(plan(film, dwell=30.0))
    numbers = []
    for notice in run:
        numbers.append(notice.n)
        if len(numbers) == 100:
            cable.pull(gone_s)
    assert (run.end, run.proven, film.lost, whole(numbers)) == ("link_lost", True, 0, True)
    assert film.status()["state"] == "rest"


def test_a_link_that_does_not_come_back_is_given_up_and_what_was_measured_is_kept(
    film: Bench, cable: Cable, tmp_path: Path
) -> None:
    class Puller:
        def began(self, plan: object, run: object) -> None:
            """Nothing to do."""

        def happened(self, notice: Any, run: Any) -> None:
            if len(run.rows) == 80:
                cable.pull(1e6)

    with Store(tmp_path / "r.db") as store:
        with pytest.raises(LinkError, match="is lost") as caught:
            film.test("47n 630V film", store=store, watcher=Puller())
        (left,) = store.records()
        assert (left.state, len(store.samples(left.id))) == ("interrupted", 80)
    assert len(caught.value.measured) == 80
    assert "discharges the part by itself" in caught.value.remedy
    cable.port.wait(60)
    assert abs(truth(film).part_V) < 1


def test_giving_up_takes_half_a_minute_and_not_more(film: Bench, cable: Cable) -> None:
    film.start(plan(film))
    cable.pull(1e6)
    begin = cable.clock()
    with pytest.raises(LinkError):
        film.rest(100.0)
    assert RECONNECT_S <= cable.clock() - begin < RECONNECT_S + 1


def test_another_box_at_the_same_port_is_not_taken_for_the_first(
    film: Bench, cable: Cable, tmp_path: Path
) -> None:
    run = film.start(plan(film))
    mine = cable.port
    cable.port = Cable(scenario(tmp_path, FILM) + "?seed=6").port
    cable.pull(0.0)
    try:
        with pytest.raises(WrongBoxError, match="Another box"):
            list(run)
    finally:
        mine.close()


def test_a_box_that_was_restarted_while_the_link_was_gone_says_so(film: Bench, cable: Cable) -> None:
    run = film.start(plan(film, dwell=30.0))
    with pytest.raises(FaultError, match="restarted"):
        for _ in run:
            if len(run.rows) == 60:
                world(film).ask_reset()
                cable.pull(1.0)
    assert run.over


# ---- a link that carries nothing, without breaking


@pytest.mark.parametrize(("silent_s", "end"), [(1.0, "complete"), (6.0, "link_lost"), (25.0, "link_lost")])
def test_a_silent_link_brings_everything_when_it_speaks_again(
    tmp_path: Path, silent_s: float, end: str
) -> None:
    url = scenario(tmp_path, FILM, extra=fault("link_silent", 10.0, for_s=silent_s)) + "?seed=5"
    with ready(url) as box:
        run = box.start(plan(box, dwell=20.0))
        numbers = [notice.n for notice in run]
        assert (run.end, box.lost, whole(numbers)) == (end, 0, True)


def test_a_link_that_stays_silent_is_given_up(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM, extra=fault("link_silent", 10.0, for_s=1e6)) + "?seed=5"
    with ready(url) as box:
        run = box.start(plan(box, dwell=20.0))
        with pytest.raises(LinkError, match="does not answer"):
            list(run)
        assert len(run.rows) > 50
        assert box.clock() < 150


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
            box._link.pause(0.005)
        assert box.clock() - begin <= 2.5
        box._link.pause(20)
        assert box.status()["state"] == "rest"
        list(run)
        assert run.end == "link_lost"


# ---- taken up by another host


@pytest.mark.parametrize("gone_s", [0.5, 40.0])
def test_a_run_is_taken_up_by_its_key_from_its_beginning(cable: Cable, gone_s: float) -> None:
    """A program that died in mid-run: the next one, with the same plan, has the run from its first event."""
    with cable.bench() as first:
        first.settle()
        list(first.start(plan(first)))  # an earlier run, whose events are not this one's
        asked = plan(first, dwell=8.0)
        run = first.start(asked)
        seen = []
        for notice in run:
            seen.append(notice)
            if len(seen) == 70:
                break
    cable.port.wait(gone_s)
    with cable.bench() as second:
        again = second.start(asked)
        numbers = [notice.n for notice in again]
    assert (again.number, again.end) == (run.number, "complete" if gone_s < 2 else "link_lost")
    assert whole(numbers)
    assert numbers[:70] == [notice.n for notice in seen]
    assert again.rows[: len(run.rows)] == run.rows
    assert second.lost == 0


def test_events_of_an_earlier_run_are_not_taken_for_this_one_s(cable: Cable) -> None:
    with cable.bench() as box:
        box.settle()
        for _ in box.start(plan(box, dwell=60.0)):
            if box.clock() > 60:
                break
        box.settle()
        box._link.pause(30)  # the lid is opened and closed; nobody has read what came since
        run = box.start(plan(box))
        list(run)
    times = [row[1] for row in run.rows]
    assert run.end == "complete"
    assert times == sorted(times)
    assert times[0] < 200


# ---- a real socket, cut by what stands between


class Proxy:
    """Passes bytes on to a served box, and breaks the connection when told."""

    def __init__(self, target: tuple[str, int]) -> None:
        self._target = target
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.url = f"socket://127.0.0.1:{self._listener.getsockname()[1]}"
        self._pair: list[socket.socket] = []
        self.connections = 0
        threading.Thread(target=self._serve, daemon=True).start()

    def _serve(self) -> None:
        while True:
            try:
                near, _ = self._listener.accept()
                far = socket.create_connection(self._target)
            except OSError:
                return
            self.connections += 1
            self._pair = [near, far]
            for one, other in ((near, far), (far, near)):
                threading.Thread(target=self._pass, args=(one, other), daemon=True).start()

    @staticmethod
    def _pass(one: socket.socket, other: socket.socket) -> None:
        try:
            while data := one.recv(4096):
                other.sendall(data)
        except OSError:
            pass
        for end in (one, other):
            end.close()

    def cut(self) -> None:
        for end in self._pair:
            with contextlib.suppress(OSError):
                end.shutdown(socket.SHUT_RDWR)

    def close(self) -> None:
        self._listener.close()


def test_a_real_connection_that_breaks_again_and_again_loses_nothing() -> None:
    speed, over = 20.0, threading.Event()
    outlet = Tcp("127.0.0.1", 0)
    host, port = outlet.name.removeprefix("socket://").split(":")
    box = Opening.from_url("emu://film?seed=3").make(time_scale=speed)
    server = threading.Thread(target=serve, args=(box, outlet, speed, over.is_set))
    server.start()
    proxy = Proxy((host, int(port)))
    try:
        with open_box(proxy.url) as bench:
            bench.settle()
            run = bench.start(plan(bench, dwell=20.0))
            numbers = []
            for notice in run:
                numbers.append(notice.n)
                if len(numbers) in (60, 120, 200):
                    proxy.cut()
            assert run.end in ("complete", "link_lost")  # a busy computer may be away for a tenth of a second
            assert (bench.lost, whole(numbers)) == (0, True)
            assert proxy.connections > 1
    finally:
        over.set()
        server.join(10)
        proxy.close()


def test_a_peer_that_hangs_up_at_once_is_no_box_and_not_waited_for() -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:

        def hang_up() -> None:
            peer, _ = listener.accept()
            peer.close()

        thread = threading.Thread(target=hang_up)
        thread.start()
        begin = time.monotonic()
        with pytest.raises(LinkError):
            open_box(f"socket://127.0.0.1:{listener.getsockname()[1]}")
        assert time.monotonic() - begin < RECONNECT_S / 2
        thread.join()
