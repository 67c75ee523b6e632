"""An outcome for people: one word from a step away, the reason, what was measured, what was not."""

from __future__ import annotations

from dwellbench.judging.say import si, with_doubt
from dwellbench.outcome import Outcome
from dwellbench.quantity import Quantity

_NEXT = {
    "use": "use it",
    "use_up_to": "use it up to {valid}",
    "re_form_then_test": "re-form it, then test again",
    "clean_and_retest": "clean and dry part and fixture, then test again",
    "check_esr": "measure its series resistance before it is used",
    "other_place": "use it elsewhere",
    "scrap": "scrap it",
}


# what an unfit part is, for the hand that holds it: one that may only be dirty, or badly clipped, is not yet for the bin
_UNFIT = {"scrap": "SCRAP", "other_place": "NOT HERE"}


def word(outcome: Outcome) -> str:
    """USE, SCRAP, RE-FORM or NOT SURE; NOT HERE for a part that only this place cannot take."""
    if outcome.next == "re_form_then_test":
        return "RE-FORM"
    if outcome.verdict == "fit":
        return "USE"
    if outcome.verdict == "unfit":
        return _UNFIT.get(outcome.next or "", "NOT SURE")
    return "NOT SURE"


def next_words(outcome: Outcome) -> str:
    """What to do next, in words."""
    if outcome.next is None:
        return outcome.to_decide or ""
    return _NEXT[outcome.next].format(valid=si(outcome.valid_to_V, "V"))


def quantity(value: Quantity | None, unit: str) -> str:
    """A quantity with its doubt: "47.70 \u00b1 0.22 nF", "above 512 Gohm", or "not determined"."""
    if value is None:
        return "not determined"
    if value.value is not None and value.low is not None and value.high is not None:
        half = (value.high - value.low) / 2
        if half <= 0.3 * abs(value.value):
            return with_doubt(value.value, half, unit)
        return f"{si(value.value, unit)}, between {si(value.low, unit, 2)} and {si(value.high, unit, 2)}"
    if value.value is not None:
        return si(value.value, unit)
    if value.low is not None and value.high is not None:
        return f"{si(value.low, unit)} to {si(value.high, unit)}"
    return f"above {si(value.low, unit)}" if value.low is not None else f"below {si(value.high, unit)}"


_SHOWN = (
    ("capacitance", "capacitance_F", "F"),
    ("total current", "total_current_A", "A"),
    ("conduction", "leakage_A", "A"),
    ("insulation", "insulation_ohm", "ohm"),
    ("time constant", "time_constant_s", "s"),
    ("grid shift", "grid_shift_V", "V"),
)


def lines(outcome: Outcome) -> list[str]:
    """The outcome in lines of text, below its one word."""
    told = [f"{outcome.verdict}: {outcome.reason}"]
    if outcome.test_V is not None:
        told.append(f"Tested at {outcome.test_V:.0f} V for {outcome.dwell_s or 0:.0f} s.")
    told += [
        f"  {name:<14} {quantity(getattr(outcome, key), unit)}"
        for name, key, unit in _SHOWN
        if getattr(outcome, key) is not None
    ]
    told += [f"  found: {finding.id.replace('_', ' ')}. {finding.evidence}" for finding in outcome.findings]
    if outcome.limits:
        ruling = outcome.limits[0]
        what = ruling.quantity.rpartition("_")[0].replace("_", " ")
        doubt = "" if ruling.status in ruling.source else f"; {ruling.status}"
        told.append(f"  ruling limit: {what} {si(ruling.value, ruling.unit)} ({ruling.source}{doubt}).")
    if outcome.suits and outcome.role is None:
        told.append("  suits: " + ", ".join(suit.role.replace("_", " ") for suit in outcome.suits) + ".")
    if outcome.not_tested:
        told.append("  not tested: " + ", ".join(what.replace("_", " ") for what in outcome.not_tested) + ".")
    told += [f"  assumed: {what}" for what in outcome.assumed] + [f"  note: {note}" for note in outcome.notes]
    if outcome.simulated:
        told.append("  simulated: made on an emulated box, not on a real part.")
    if outcome.record:
        told.append(f"  record {outcome.record}")
    return told
