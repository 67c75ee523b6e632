"""A run on the empty fixture: nothing connected is then no reason to end, anything else still is."""

from __future__ import annotations

from pathlib import Path

import pytest
from tests.helpers import FILM, OPEN, SHORT, fault, plan, ready, scenario, truth

from dwellbench.plan import Plan


def ended(url: str) -> tuple[str | None, str | None]:
    """How a run on what should be the empty fixture ends: its end and fault."""
    with ready(url + "?seed=5") as box:
        run = box.start(Plan.empty(box.ratings, 630.0, 5.0))
        for _ in run:
            pass
        assert run.proven
        assert not truth(box).hurt
    return run.end, run.fault


def test_the_empty_fixture_is_held_at_the_voltage(tmp_path: Path) -> None:
    assert ended(scenario(tmp_path, OPEN)) == ("complete", None)


@pytest.mark.parametrize(
    ("body", "end"), [(FILM, "value_off"), (SHORT, "short"), ("capacitance_F = 470e-12\n", "value_off")]
)
def test_a_part_in_it_is_not_energised_beyond_the_look(tmp_path: Path, body: str, end: str) -> None:
    assert ended(scenario(tmp_path, body))[0] == end


def test_every_interlock_still_holds(tmp_path: Path) -> None:
    assert ended(scenario(tmp_path, OPEN, extra=fault("lid_open", 10.0, for_s=5.0))) == ("fault", "lid_open")


def test_without_being_told_an_empty_fixture_still_ends_open(tmp_path: Path) -> None:
    with ready(scenario(tmp_path, OPEN) + "?seed=5") as box:
        assert box.run(plan(box)).text("end") == "open"
