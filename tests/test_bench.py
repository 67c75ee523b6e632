"""Box, judge and store together: the record is whole whatever happens."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from tests.helpers import FILM, SHORT, fault, plan, ready, scenario, truth

from dwellbench.bench import refuse_looks
from dwellbench.errors import RefusedError, StoppedError, UsageError
from dwellbench.records import Store


def test_a_part_from_its_marking_to_its_record(tmp_path: Path) -> None:
    with ready(scenario(tmp_path, FILM) + "?seed=5") as box, Store(tmp_path / "r.db") as store:
        outcome = box.test("47n 630V film", "coupling@310V/470k", store, label="A/1 \u2603", note='"quoted"')
        record = store.record(str(outcome.record))
    assert (outcome.verdict, outcome.next, outcome.simulated) == ("fit", "use", True)
    assert record["outcomes"][0]["verdict"] == "fit"
    assert (record["state"], record["end"], record["label"]) == ("ended", "complete", "A/1 \u2603")
    assert record["calibration"]["id"] == outcome.calibration
    assert [event["kind"] for event in record["events"]].count("done") == 1


def test_every_sample_that_came_is_in_the_record(tmp_path: Path) -> None:
    rows: list[list[int]] = []

    class Watch:
        def began(self, plan: object, run: object) -> None:
            """Nothing to do."""

        def happened(self, notice: object, run: object) -> None:
            if getattr(notice, "method", "") == "samples":
                rows.extend(notice.params["rows"])  # type: ignore[attr-defined]

    with ready(scenario(tmp_path, FILM) + "?seed=5") as box, Store(tmp_path / "r.db") as store:
        outcome = box.test("47n 630V film", store=store, plan=plan(box), watcher=Watch())
        kept = store.samples(str(outcome.record))
    assert kept.tolist() == rows


@pytest.mark.parametrize(
    ("marking", "body", "shortened"), [("47n 630V film", FILM, True), ("47n 630V paper", FILM, False)]
)
def test_a_dwell_may_end_early_when_the_verdict_is_certain_and_never_for_paper(
    tmp_path: Path, marking: str, body: str, shortened: bool
) -> None:
    with ready(scenario(tmp_path, body) + "?seed=5") as box:
        outcome = box.test(marking, "coupling@310V/470k", may_end_early=True)
    assert outcome.verdict == "fit"
    assert outcome.dwell_complete is not shortened
    assert (outcome.dwell_s is not None and outcome.dwell_s < 15) is shortened
    assert outcome.end == ("finished" if shortened else "complete")


def test_a_dead_short_is_unfit_with_status_3_and_the_box_at_rest(tmp_path: Path) -> None:
    with ready(scenario(tmp_path, SHORT) + "?seed=5") as box, Store(tmp_path / "r.db") as store:
        outcome = box.test("100n 400V paper", "tone", store)
        assert box.status()["state"] == "rest"
    assert (outcome.verdict, outcome.exit_status, outcome.next) == ("unfit", 3, "scrap")
    assert outcome.found("short")
    assert outcome.capacitance_F is None
    assert outcome.insulation_ohm is None


def test_a_fault_is_no_verdict_and_the_record_says_which(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM, extra=fault("stop_pressed", 12.0)) + "?seed=5"
    with ready(url) as box, Store(tmp_path / "r.db") as store:
        outcome = box.test("47n 630V film", store=store, plan=plan(box, dwell=30.0))
        record = store.record(str(outcome.record))
    assert (outcome.verdict, outcome.fault, record["fault"]) == ("undecided", "stop", "stop")
    assert outcome.leakage_A is None


def test_a_refused_run_leaves_a_record_that_says_so_and_no_outcome(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM, extra=fault("lid_open", 1.0, run=0)) + "?seed=5"
    with ready(url) as box, Store(tmp_path / "r.db") as store:
        with pytest.raises(RefusedError):
            box.test("47n 630V film", store=store)
        (summary,) = store.records()
        record = store.record(summary.id)
    assert (record["state"], record["outcomes"]) == ("interrupted", [])
    assert "lid" in record["why"]


def test_stopped_by_the_user_keeps_everything_and_the_part_is_discharged(tmp_path: Path) -> None:
    with ready(scenario(tmp_path, FILM) + "?seed=5") as box, Store(tmp_path / "r.db") as store:

        class Impatient:
            def began(self, plan: object, run: object) -> None:
                """Nothing to do."""

            def happened(self, notice: object, run: object) -> None:
                if getattr(run, "state", "") == "dwell":
                    raise KeyboardInterrupt

        with pytest.raises(StoppedError):
            box.test("47n 630V film", store=store, plan=plan(box, dwell=60.0), watcher=Impatient())
        record = store.record("R1")
        assert abs(truth(box).part_V) < 30
    assert (record["state"], record["why"]) == ("interrupted", "stopped by the user")
    assert any(event["kind"] == "done" and event["end"] == "aborted" for event in record["events"])


@pytest.mark.parametrize("looks", ["bulged", "leaking", "cracked"])
def test_a_part_that_looks_unsafe_is_not_energised(looks: str) -> None:
    refuse_looks(None)
    refuse_looks("sound")
    with pytest.raises(UsageError, match="not energised"):
        refuse_looks(looks)
    with pytest.raises(UsageError, match="not a word"):
        refuse_looks("pretty")


_KILLED = """
import sys
from dwellbench.bench import open_box
from dwellbench.records import Store
with Store(sys.argv[2]) as store, open_box(sys.argv[1]) as box:
    print("began", flush=True)
    box.test("47n 630V film", "coupling", store)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="pseudo-terminals")
def test_a_host_killed_in_mid_run_leaves_a_safe_box_and_every_sample_that_had_come(tmp_path: Path) -> None:
    """Real processes: an emulated box served on a pseudo-terminal, a host killed with SIGKILL, the box asked again."""
    from dwellbench.bench import open_box

    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    link, database = tmp_path / "bench", tmp_path / "r.db"
    run = "from dwellbench.cli.main import main; main()"
    serve = [sys.executable, "-c", run, "emulate", "--pty", str(link), "--seed", "5", "--speed", "15"]
    with subprocess.Popen(serve, env=environment, stdout=subprocess.DEVNULL) as server:
        try:
            _wait(lambda: link.exists())
            host = subprocess.Popen(
                [sys.executable, "-c", _KILLED, str(link), str(database)],
                env=environment,
                stdout=subprocess.DEVNULL,
            )
            _wait(lambda: database.exists() and _kept(database) >= 100)
            before = _kept(database)
            host.send_signal(signal.SIGKILL)
            host.wait()
            time.sleep(1.0)  # fifteen seconds of the box's time: silence, then it empties the part by itself
            with open_box(str(link)) as box:
                status = box.wait_for(lambda now: now["state"] == "rest", 60.0) or box.status()
                assert (status["state"], status["safe"]) == ("rest", True), status
            with Store(database) as store:
                (left,) = store.unfinished()
                assert left.state == "interrupted"
                assert len(store.samples(left.id)) >= before
                assert store.unfinished() == []
        finally:
            server.terminate()
            server.wait()


def _kept(database: Path) -> int:
    """How many sample rows are in the file, seen from another process."""
    import sqlite3

    from dwellbench.records.packing import unpack

    try:
        connection = sqlite3.connect(f"file:{database}?mode=ro", uri=True)
        try:
            return sum(len(unpack(row[0])) for row in connection.execute("SELECT samples FROM sample_batch"))
        finally:
            connection.close()
    except sqlite3.Error:
        return 0


def _wait(done: object, most_s: float = 30.0) -> None:
    until = time.monotonic() + most_s
    while not done():  # type: ignore[operator]
        assert time.monotonic() < until, "waited too long"
        time.sleep(0.05)


@pytest.mark.parametrize(
    ("which", "position"), [("low", "rest"), ("low", "work"), ("mid", "rest"), ("mid", "work")]
)
@pytest.mark.parametrize("at_s", [0.0, 7.0])
@pytest.mark.parametrize(
    ("marking", "body"),
    [
        ("47n 630V film", "capacitance_F = 47e-9\nleakage_ohm = 2e9\n"),
        ("100n 400V paper", "capacitance_F = 100e-9\nleakage_ohm = 2e8\n"),
    ],
)
def test_a_shunt_relay_that_sticks_never_makes_a_leaky_part_fit(
    tmp_path: Path, marking: str, body: str, at_s: float, which: str, position: str
) -> None:
    """A leak of 150 nA or 1.5 uA that would read ten to a thousand times too small."""
    stuck = fault("shunt_relay_stuck", at_s, which=f'"{which}"', position=f'"{position}"')
    with ready(scenario(tmp_path, body, extra=stuck) + "?seed=5") as box:
        outcome = box.test(marking, "coupling@300V/470k")
        assert outcome.verdict != "fit"
        assert not truth(box).hurt
