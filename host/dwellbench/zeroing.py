"""Measuring the empty fixture with a box, and leaving what was found in the box and in the records."""

from __future__ import annotations

from dwellbench.box import Box
from dwellbench.errors import UsageError
from dwellbench.measure.estimates import estimate
from dwellbench.measure.trace import circuit_of
from dwellbench.measure.zero import VALID_H, Zero, with_zero, zero_of
from dwellbench.plan import Plan
from dwellbench.records import Store


def measure_zero(
    box: Box, plan: Plan, *, humidity_percent: float | None = None, valid_h: float = VALID_H
) -> Zero:
    """Run a plan made by `Plan.empty` on the closed, empty fixture. Nothing is kept yet.

    Raises UsageError when something is between the clips, FaultError and LinkError as a run does.
    """
    trace = box.run(plan)
    end = trace.text("end")
    if end not in ("complete", "finished"):
        raise UsageError(
            f"The run on the empty fixture ended with {end}: something is between the clips.",
            remedy="Take it out, close the lid and run it again.",
        )
    return zero_of(
        estimate(trace, None, None).leakage,
        circuit_of(trace).u_gain_i,
        made_utc=trace.text("time_utc") or "",
        temperature_C=trace.number("temperature_C"),
        humidity_percent=humidity_percent,
        valid_h=valid_h,
    )


def keep_zero(box: Box, zero: Zero, store: Store | None = None) -> None:
    """Write a zero into the box's calibration, beside what that holds already; the lid must be opened for it.

    Later tests on this box use it by themselves. Raises UsageError when nobody opens the lid.
    """
    document = with_zero(box.calibration(), box.identity.box, zero)
    box.wait_for_open_lid()
    box.write_pages("calibration", document)
    if store is not None:
        store.keep_calibration({"box": box.identity.box, "model": box.identity.model}, document)
