"""Ending a dwell early: when it may be, when never, and that the whole dwell would have said the same."""

from __future__ import annotations

import random
from dataclasses import replace
from functools import cache
from math import log10
from pathlib import Path

import numpy as np
import pytest

from dwellbench.emulator.direct import record
from dwellbench.emulator.part_spec import PartSpec
from dwellbench.judge import judge, may_end
from dwellbench.judging.early import LEAST_S, SURE, stricter
from dwellbench.limits.decide import Thresholds
from dwellbench.limits.place import Place
from dwellbench.measure.calibrate import calibrate
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.csv_read import read_csv
from dwellbench.measure.raw import RawTrace
from dwellbench.measure.trace import Trace
from dwellbench.part import Part

DATA = Path(__file__).parents[1] / "measure" / "data"
PLACE = Place.parse("coupling@310V/470k")
FILM = Part("47n 630V film", capacitance_F=47e-9, rated_V=630.0, rated_kind="dc", dielectric="film")


@cache
def made(name: str) -> Trace:
    return read_csv(DATA / f"{name}.csv")


def so_far(trace: Trace, dwell_s: float) -> Trace:
    """What had come of a trace after so much of its dwell."""
    first = float(trace.t_s[trace.rows("dwell")][0]) - 0.1
    keep = trace.t_s <= first + dwell_s + 1e-6
    arrays = {name: getattr(trace, name)[keep] for name in trace.__dataclass_fields__ if name != "header"}
    return Trace(**arrays, header=trace.header)


def test_a_sound_part_may_end_after_ten_seconds_and_not_before() -> None:
    trace = made("film_47n")
    assert may_end(so_far(trace, LEAST_S - 0.5), FILM, PLACE) is None
    early = may_end(so_far(trace, LEAST_S + 0.5), FILM, PLACE)
    assert early is not None
    assert early.verdict == "fit"
    assert "later leaks are not seen" in early.why


def test_a_hopeless_part_may_end_too() -> None:
    leaky = replace(made("paper_2M"), header=dict(made("paper_2M").header))
    early = may_end(so_far(leaky, 12.0), replace(FILM, capacitance_F=50e-9, rated_V=600.0), PLACE)
    assert early is not None
    assert early.verdict == "unfit"


@pytest.mark.parametrize("kind", ["paper", "electrolytic", "tantalum", None])
def test_slow_kinds_are_held_to_the_end(kind: str | None) -> None:
    assert may_end(made("film_47n"), replace(FILM, dielectric=kind), PLACE) is None


@pytest.mark.parametrize("role", ["across_the_line", "buffer"])
def test_places_that_no_test_decides_end_nothing(role: str) -> None:
    assert may_end(made("film_47n"), FILM, Place.parse(role)) is None


def test_any_activity_holds_it() -> None:
    part = replace(FILM, capacitance_F=100e-9, rated_V=400.0)
    assert may_end(made("bursts"), part, PLACE) is None
    steady = made("film_47n")
    dwell = steady.rows("dwell")
    ramp = np.where(dwell, 1.0 + 0.02 * (steady.t_s - steady.t_s[dwell][0]), 1.0)
    rising = replace(steady, i_shunt_A=steady.i_shunt_A * ramp)
    assert any(finding.id == "rising" for finding in judge(rising, FILM, PLACE).findings)
    assert may_end(rising, FILM, PLACE) is None


def test_what_ends_early_would_have_ended_alike() -> None:
    """Thirty steady film parts around the limit: no early verdict differs from that of the whole minute."""
    chance = random.Random(31)
    ended = 0
    for seed in range(30):
        farads, ohm = 10 ** chance.uniform(-8.3, -6.3), 10 ** chance.uniform(log10(2e8), 11.5)
        ladder = tuple((0.1 * 10.0**k, 8e-4 * chance.uniform(0.5, 2.0)) for k in range(5))
        run = record(
            PartSpec(capacitance_F=farads, leakage_ohm=ohm, esr_ohm=0.5, absorption=ladder), 400.0, 60.0, seed
        )
        trace = calibrate(RawTrace.from_rows(run.rows), Calibration.from_json(run.calibration))
        part = replace(FILM, capacitance_F=farads, rated_V=400.0)
        early = may_end(so_far(trace, 12.0), part, PLACE)
        if early is not None:
            ended += 1
            assert judge(trace, part, PLACE).verdict == early.verdict, (seed, farads, ohm)
    assert ended >= 20


def test_the_users_own_thresholds_stand_where_they_ask_for_more() -> None:
    assert stricter(None) == SURE
    assert stricter(Thresholds(0.9, 0.1)) == SURE
    assert stricter(Thresholds(0.9999, 1e-5)) == Thresholds(0.9999, 1e-5)
