"""What the box said no to, in the words of a person: one sentence and what to do."""

from __future__ import annotations

from dwellbench.errors import DwellbenchError, FaultError, RefusedError
from dwellbench.wire.codes import row
from dwellbench.wire.core import Refusal

# error id: (sentence, remedy)
_SAY = {
    "lid": ("The lid is not closed.", "Close the lid until the bolt can move, then try again."),
    "lid_must_be_open": ("The lid must be open for this.", "Open the lid and try again."),
    "locked_out": (
        "The box is locked out.",
        "See why with: dwellbench box. Acknowledge there once it is safe.",
    ),
    "busy": ("A run is under way on this box.", "Wait for its end, or stop it."),
    "stop_pressed": ("The stop button is pressed.", "Release it, then try again."),
    "not_safe": (
        "Discharge is not proven yet.",
        "Leave the lid closed and wait; look again with: dwellbench box.",
    ),
    "not_now": ("The box cannot do this now.", "Wait until it is at rest."),
    "hardware": ("The box's own check found something wrong.", "See what with: dwellbench box."),
    "settings": (
        "The box does not accept its settings.",
        "Write settings that fit this box, with the lid open.",
    ),
    "unsupported": ("This box's firmware cannot do this.", "Load the firmware that belongs to this host."),
    "internal_error": (
        "The box's firmware met a defect of its own.",
        "Try again; keep the wire log if it returns.",
    ),
}
_BEYOND = {
    "volts_mv": ("The voltage is above this box's rating.", "Choose a lower voltage with --volts."),
    "dwell_ms": ("The dwell is longer than this box allows.", "Choose a shorter one with --dwell."),
    "energy": (
        "The part would store more energy than this box is rated for.",
        "Test it at a lower voltage with --volts.",
    ),
    "bleed_ms": ("The bleed or recovery time is longer than this box allows.", "Choose a shorter one."),
}


_MISSING = (
    "The part's charge is not accounted for: a lead may have let go, or the box was reset in a run.",
    "Treat the part as charged. Wait, use an insulated shorting stick through the port, then: dwellbench box --acknowledge --shorted.",
)


def refused(refusal: Refusal) -> DwellbenchError:
    """Return the error to raise for a refusal."""
    name = refusal.name
    if name == "beyond_rating":
        sentence, remedy = _BEYOND.get(
            str(refusal.data), ("This is beyond the box's rating.", "Ask for less.")
        )
    elif name == "not_safe" and refusal.data == "charge_missing":
        sentence, remedy = _MISSING
    else:
        sentence, remedy = _SAY.get(
            name, (f"The box refused: {refusal.message}.", "See the protocol's text for this error.")
        )
    details = {"code": refusal.code, "reason": name, "data": refusal.data}
    if name == "locked_out":
        return FaultError(sentence, remedy=remedy, **details)
    return RefusedError(sentence, remedy=remedy, **details)


def fault(fault_id: str) -> FaultError:
    """Return the error to raise for a fault."""
    known = row("faults", fault_id)
    text = str(known["text"])
    return FaultError(f"{text[0].upper()}{text[1:]}.", remedy=str(known.get("remedy", "")), fault=fault_id)
