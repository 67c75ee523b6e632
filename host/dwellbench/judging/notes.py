"""What was assumed, what was not tested, and what a reader should know beside the numbers."""

from __future__ import annotations

from dwellbench.judging.case import Case
from dwellbench.judging.say import seconds, si, volts
from dwellbench.measure.reference import reference_box
from dwellbench.measure.validity import told_age
from dwellbench.measure.zero import SAME_VOLTS
from dwellbench.outcome import Finding

_PLAIN = {
    "charge_ohm": "charge path {} (reference box)",
    "divider_ohm": "divider {} (reference box)",
    "bleed_ohm": "bleed {} (reference box)",
    "fixture_ohm": "empty fixture 1 Tohm, a factor of about two (reference box)",
    "temperature_C": "part at 23 C, not measured",
    "u_gain_v": "volts within the reference box's tolerance, u = {}",
    "u_gain_i": "amperes within the reference box's tolerance, u = {}",
}
_ABSORBING = ("paper", "electrolytic", "tantalum", "ceramic_2", "ceramic", None)
_NORMAL_C = (15.0, 30.0)


def assumed(case: Case) -> tuple[str, ...]:
    """Numbers that the trace does not state, with what stands in for them."""
    box = reference_box()
    shown = {
        "charge_ohm": si(box.charge_ohm, "ohm"),
        "divider_ohm": si(box.divider_ohm, "ohm", 4),
        "bleed_ohm": si(box.bleed_ohm, "ohm"),
        "u_gain_v": f"{100.0 * box.u_path:.2g} %",
        "u_gain_i": f"{100.0 * box.u_path:.2g} %",
    }
    return tuple(f"{key}: {_PLAIN[key].format(shown.get(key, ''))}" for key in case.trace.assumed)


def not_tested(case: Case) -> tuple[str, ...]:
    """What this box cannot see of such a part."""
    told = [] if case.esr_ohm is not None else ["esr"]
    told.append("ripple")
    rated_V, valid_V = case.part.rated_V, case.valid_to_V
    if valid_V is None or rated_V is None or rated_V > 1.02 * valid_V:
        told.append("above_V")
    told += ["pulse", "ac", "working_temperature", "endurance"]
    return tuple(told)


def notes(case: Case, found: list[Finding]) -> tuple[str, ...]:
    """Sentences beside the numbers."""
    told = [
        "Capacitance is a direct-current value: the charge"
        + (f" for {volts(case.test_V)}" if case.test_V is not None else "")
        + ", fast absorption included.",
        f"Total current {seconds(case.estimates.dwell_s or 0.0)} after the voltage was in.",
    ]
    told += _zero(case)
    if case.part.dielectric in ("ceramic_2", "ceramic"):
        told.append(
            "Class II ceramic loses capacitance under voltage, so the figure is not comparable with a "
            "marking made at 1 kHz "
            "without bias."
        )
    told += _times(case)
    temperature = case.temperature_C
    if temperature is not None and not _NORMAL_C[0] <= temperature <= _NORMAL_C[1]:
        told.append(
            f"Measured at {temperature:.0f} C; the limits hold at 20 to 25 C and no published correction is applied."
        )
    if case.part.rated_kind == "ac":
        told.append(
            "The marking is an AC rating; it is not turned into a DC one, and the verdict holds for the DC voltage tested."
        )
    if case.esr_ohm is not None:
        told.append(f"Series resistance given by the user: {si(case.esr_ohm, 'ohm')}.")
    return tuple(told)


def _zero(case: Case) -> list[str]:
    """Which zero of the empty fixture was taken off, and how old it was."""
    zero_V, age_s = case.trace.number("zero_V"), case.trace.number("zero_age_s")
    ohm = case.trace.number("fixture_ohm")
    if zero_V is None or ohm is None:
        return []
    age = "" if age_s is None else f", {told_age(age_s)} before the test"
    told = [
        f"Empty fixture: {si(ohm, 'ohm')} at {volts(zero_V)}, measured {case.trace.text('zero_utc')}{age}."
    ]
    asked_V = case.asked_V
    if asked_V is not None and abs(zero_V - asked_V) > SAME_VOLTS * asked_V:
        told.append("That zero is of another voltage; its doubt is taken as of one never measured.")
    return told


def _times(case: Case) -> list[str]:
    told: list[str] = []
    if case.end == "finished":
        told.append("The dwell was cut short; parts that begin to leak late are not seen.")
    if case.part.dielectric in _ABSORBING:
        told.append(
            "A second test soon after reads less absorption; leave the part shorted five times as long as it was held."
        )
    recovery = case.estimates.recovery_percent
    if recovery is not None and recovery.value is not None:
        told.append(
            "Recovery belongs to this run's own times of charge, bleed and watching; compare only what was taken alike."
        )
    return told
