"""Runs that ended before a reading: what each kind of end says of the part, and what it does not.

Nothing is made up for what was not measured: an interrupted run has no quantities, only that it was
interrupted.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from dwellbench.judging.case import Case
from dwellbench.judging.say import si, volts
from dwellbench.limits.decide import UNDECIDED, UNFIT
from dwellbench.measure.trace import Trace
from dwellbench.outcome import Finding

MEASURED = ("complete", "finished")
"""Ends after which the whole trace is judged."""

_CODE_V = 1.024 / 32768 * 1001  # one code of the part's divider: below it a short's resistance is not told

AGAIN = "Run the test again."


@dataclass(frozen=True)
class Ended:
    """What an early end comes to."""

    verdict: str
    reason: str
    finding: Finding
    next: str | None = None
    to_decide: str | None = None


def ended(case: Case) -> Ended:
    """Say what a run that ended with `case.end` tells. Unknown ends count as interrupted."""
    return _ENDS.get(case.end, _interrupted)(case)


def look_F(trace: Trace) -> float | None:
    """Capacitance that the box found at its look at 20 V, farads, a few per cent; None when it found none."""
    found = trace.number("look_pf")
    return None if not found or found <= 0.0 else found * 1e-12


def _short(case: Case) -> Ended:
    node_V, amps = case.trace.number("short_mv"), case.trace.number("short_na")
    evidence = "The voltage did not rise although the whole current of the charge path flowed."
    if node_V is not None and amps:
        part_V = node_V * 1e-3 - amps * 1e-9 * _shunt_ohm(case.trace)
        ohm = max(part_V, _CODE_V) / (amps * 1e-9)
        about = "about" if part_V >= _CODE_V else "less than"
        evidence = f"{volts(max(part_V, 0.0))} on the part while {si(amps * 1e-9, 'A')} flowed: {about} {si(ohm, 'ohm')}."
    return Ended(UNFIT, "The part is shorted; it never took charge.", Finding("short", evidence), "scrap")


def _shunt_ohm(trace: Trace) -> float:
    """The shunt that the current flowed through, ohms: what was read is the node above part and shunt together."""
    before = np.isin(trace.stage, ("prove", "look", "charge"))
    return float(trace.shunt_ohm[before][-1]) if before.any() else 0.0


def _open(case: Case) -> Ended:
    found = look_F(case.trace)
    marked = case.part.capacitance_F
    charge = f"{si(found, 'F')} at 20 V" if found else "no charge at 20 V"
    evidence = f"The box saw {charge}" + (f" where {si(marked, 'F')} is marked." if marked else ".")
    return Ended(
        UNFIT,
        "No charge flowed into the part: a lead is open inside, or a clip does not touch.",
        Finding("open_lead", evidence),
        "clean_and_retest",
        "Clean the leads, fit the part again and repeat; if it stays, the part is open: scrap.",
    )


def _reversed(case: Case) -> Ended:
    node_V = case.trace.number("short_mv")
    stood = f" at {volts(node_V * 1e-3)}" if node_V is not None else " at a few volts"
    return Ended(
        UNDECIDED,
        "The voltage stalled at a few volts: the part is fitted the wrong way round, or shorted.",
        Finding("reversed", f"The voltage stalled{stood} while the whole current of the charge path flowed."),
        None,
        "Check which lead is positive, fit it to the marked clip, test again; if it stalls again the part is shorted: scrap.",
    )


def _value_off(case: Case) -> Ended:
    found, marked = look_F(case.trace), case.part.capacitance_F
    if found is None or not marked:
        return _interrupted(case)
    evidence = f"{si(found, 'F')} at 20 V where {si(marked, 'F')} is marked ({100.0 * (found / marked - 1.0):+.0f} %)."
    finding = Finding("value_off", evidence)
    if case.part.doubts or found > marked:
        return Ended(
            UNDECIDED,
            "The capacitance at 20 V is far from the marking as it was read; nothing was stressed.",
            finding,
            None,
            "Read the marking again, give the value found, or test with a wider expectation.",
        )
    return Ended(UNFIT, "Most of the capacitance is gone: far below the marking at 20 V.", finding, "scrap")


def _residual(case: Case) -> Ended:
    found_mV = case.trace.number("residual_mv")
    stood = volts(found_mV * 1e-3) if found_mV else "more than 10 V"
    return Ended(
        UNDECIDED,
        "The part was charged before the run, so nothing was measured.",
        Finding("residual_charge", f"{stood} stood on the part before the run."),
        None,
        "Leave it shorted for five times as long as it was last at voltage, then test again.",
    )


def _over_energy(case: Case) -> Ended:
    found = look_F(case.trace)
    return Ended(
        UNDECIDED,
        "At the voltage asked for, the part would store more than the box is rated for.",
        Finding(
            "value_off",
            f"{si(found, 'F')} at 20 V." if found else "The capacitance at 20 V is larger than expected.",
        ),
        None,
        "Test at a lower voltage with --volts.",
    )


def _fault(case: Case) -> Ended:
    """A fault says something of the box, and two of them of the part."""
    name = case.fault or "fault"
    special = _FAULTS.get(name)
    finding = Finding("fault", f"The run was ended by the fault {name}.")
    if special is not None:
        verdict, reason, also, following = special
        return Ended(
            verdict, reason, Finding(also, f"The run was ended by the fault {name}."), following, AGAIN
        )
    return Ended(UNDECIDED, f"Interrupted by the fault {name}; nothing was measured.", finding, None, AGAIN)


def _interrupted(case: Case) -> Ended:
    told = _INTERRUPTIONS.get(case.end, f"it ended with {case.end!r}")
    return Ended(
        UNDECIDED,
        f"The run was interrupted: {told}. Nothing counts as measured.",
        Finding("interrupted", f"The run was interrupted: {told}."),
        None,
        AGAIN,
    )


_INTERRUPTIONS = {
    "aborted": "it was stopped",
    "link_lost": "the link to the box was lost",
    "complete": "there is no dwell in the trace",
    "finished": "there is no dwell in the trace",
}

# Faults that tell of the part: verdict, reason, finding, next.
_FAULTS: dict[str, tuple[str, str, str, str | None]] = {
    "over_current": (
        UNFIT,
        "The part broke down: the current rose above the plan's ceiling.",
        "short",
        "scrap",
    ),
    "charge_timeout": (
        UNDECIDED,
        "The voltage did not come in: far larger than marked, or it leaks too much for the charge path.",
        "sag",
        None,
    ),
    "charge_left": (
        UNFIT,
        "A lead let go while the part was charged. Treat it as charged.",
        "open_lead",
        "scrap",
    ),
}

_ENDS: dict[str, Callable[[Case], Ended]] = {
    "short": _short,
    "open": _open,
    "reversed": _reversed,
    "value_off": _value_off,
    "residual": _residual,
    "over_energy": _over_energy,
    "fault": _fault,
    "aborted": _interrupted,
    "link_lost": _interrupted,
}
