"""Faults in a run, over the real wire: what the host says of them, and how one gets out."""

from __future__ import annotations

from pathlib import Path

import pytest
from tests.helpers import FILM, FILM_1U, fault, plan, ready, scenario, truth

from dwellbench.errors import FaultError, RefusedError


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


def test_a_box_that_was_restarted_is_used_again_without_opening_it_anew(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM, extra=fault("controller_reset", 10.0)) + "?seed=5"
    with ready(url) as box:
        before = box.identity.boot
        with pytest.raises(FaultError, match="restarted"):
            box.run(plan(box, dwell=20.0))
        with pytest.raises(FaultError, match="reset"):
            box.settle()
        assert box.identity.boot == before + 1
        box.rest(40)
        box.acknowledge(shorted=True)
        box.wait_for(lambda now: now["lid"] == "open", 60)  # somebody looks at the part
        box.wait_for(lambda now: now["lid"] == "closed", 60)
        assert box.run(plan(box)).text("end") == "complete"


def test_a_run_that_a_fault_ended_says_which_and_carries_what_was_measured(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM, extra=fault("stop_pressed", 12.0)) + "?seed=5"
    with ready(url) as box:
        with pytest.raises(FaultError, match="stop button") as caught:
            box.run(plan(box, dwell=30.0))
        assert caught.value.details["fault"] == "stop"
        assert len(caught.value.measured) > 100
        assert "measured" not in caught.value.as_json()["error"]
