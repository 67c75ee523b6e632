"""Calibrating a box: runs on references, what is made of them, and leaving it in the box and in the records."""

from __future__ import annotations

import secrets
from collections.abc import Sequence
from dataclasses import replace
from datetime import UTC, datetime

from dwellbench.box import LID_S, Box
from dwellbench.errors import UsageError
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.fitted_scales import (
    Known,
    Met,
    Steady,
    amps_scales,
    steady,
    volts_scales,
    with_scales,
)
from dwellbench.measure.validity import in_force
from dwellbench.plan import Plan, Ratings
from dwellbench.records import Store

VALID_DAYS = 365.0
OFF = 0.05
"""A meter's reading further than this from the voltage asked for is taken for a slip."""


def reference_plan(ratings: Ratings, volts: float, dwell: float) -> Plan:
    """A run on a reference, of whatever kind it is. Raises UsageError for what the box cannot give."""
    return replace(Plan.empty(ratings, volts, dwell), fixture=False, nudge=False)


def measure_reference(box: Box, plan: Plan) -> Steady:
    """Run on the reference under the closed lid. Raises UsageError when it held no steady reading."""
    run = box.start(plan)
    for _ in run:
        pass
    run.raise_fault()
    return steady(run.raw())


def next_reference(box: Box) -> None:
    """Wait until the lid has been opened and closed again over the next reference. UsageError when nobody does."""
    box.wait_for_open_lid()
    if box.wait_for(lambda now: now["state"] == "rest" and now["lid"] == "closed", LID_S) is None:
        raise UsageError("The lid was not closed.", remedy="Run it again, with the references at hand.")


def current(box: Box) -> Calibration:
    """What the box has, as far as it still holds: another box's is not used, an expired one has the drawing's doubt."""
    return in_force(Calibration.from_json(box.calibration()), box.identity.box, _now())[0]


def calibrated(
    box: Box,
    last: Calibration,
    met: Sequence[Met],
    u_meter_rel: float,
    known: Sequence[Known],
    valid_days: float = VALID_DAYS,
) -> Calibration:
    """The box's next calibration: volts from the runs with the meter, amperes from those on resistors; the rest as it was.

    Raises UsageError when the runs fix no scale at all.
    """
    volts = volts_scales(met, u_meter_rel)
    with_volts = with_scales(last, volts, {})
    amps = amps_scales(known, with_volts)
    if not volts and not amps:
        raise UsageError(
            "Two voltages in one range (below 230 V, or above) are needed for a line, or a resistor.",
            remedy="Give more voltages with --at.",
        )
    return replace(
        with_scales(with_volts, {}, amps),
        id=secrets.token_hex(4),
        box=box.identity.box,
        made_utc=_now(),
        valid_days=valid_days,
        temperature_C=box.status()["temp_mc"] / 1000.0,
    )


def keep_calibration(box: Box, calibration: Calibration, store: Store | None = None) -> None:
    """Write it to the box, for which the lid must be opened; every version stays in the records."""
    document = calibration.as_json()
    before = box.calibration()
    box.wait_for_open_lid()
    box.write_pages("calibration", document)
    if store is not None:
        identity = {"box": box.identity.box, "model": box.identity.model}
        for version in (before, document):
            if version:
                store.keep_calibration(identity, version)


def _now() -> str:
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
