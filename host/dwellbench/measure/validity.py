"""Whether what a box was calibrated with still holds: whose it is, how old it is, and what that does to its doubt.

An expired calibration is used with the drawing's own tolerance as its doubt, since nothing is known of how far the parts have
drifted since, and they were within that to begin with. A calibration of another box says nothing of this one, so the drawing's
numbers stand in for it.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime

from dwellbench.measure.calibration import Calibration, Scale

_DAY_S = 86400.0
_AHEAD_S = 300.0  # clocks of two computers may differ by that much


def age_s(made_utc: str | None, now_utc: str | None) -> float | None:
    """Seconds between two UTC times (ISO 8601); None when one of them is missing or is not a time."""
    made, now = _time(made_utc), _time(now_utc)
    return None if made is None or now is None else (now - made).total_seconds()


def _time(text: str | None) -> datetime | None:
    try:
        found = datetime.fromisoformat(str(text))
    except ValueError:
        return None
    return found.replace(tzinfo=UTC) if found.tzinfo is None else found


def lapsed(made_utc: str | None, valid_s: float | None, now_utc: str | None) -> str | None:
    """Why something made at `made_utc` no longer holds, in words; None when it holds, or no time is known."""
    age = age_s(made_utc, now_utc)
    if age is None or valid_s is None:
        return None
    if age < -_AHEAD_S:
        return f"is dated {made_utc}, later than now; one of the clocks is wrong"
    return f"expired {told_age(age - valid_s)} ago" if age > valid_s else None


def told_age(seconds: float) -> str:
    """An age in words."""
    for unit_s, name in ((_DAY_S, "days"), (3600.0, "h"), (60.0, "min")):
        if seconds >= 2.0 * unit_s:
            return f"{seconds / unit_s:.0f} {name}"
    return f"{max(seconds, 0.0):.0f} s"


def in_force(
    calibration: Calibration, box: str | None, now_utc: str | None
) -> tuple[Calibration, str | None]:
    """What may be used of a calibration for this box now, and the sentence to say when that is not all of it."""
    if calibration.nominal:
        return calibration, None
    if box is not None and calibration.box is not None and calibration.box != box:
        told = (
            f"The calibration {calibration.id} was made for the box {calibration.box}, not for this one; the drawing's numbers "
            "and their worst tolerances stand in."
        )
        return replace(Calibration.without(), zeros=()), told
    valid_s = None if calibration.valid_days is None else calibration.valid_days * _DAY_S
    why = lapsed(calibration.made_utc, valid_s, now_utc)
    if why is None:
        return calibration, None
    return _doubted(
        calibration
    ), f"The calibration {calibration.id} {why}; its doubt is taken as the drawing's tolerance."


def _doubted(calibration: Calibration) -> Calibration:
    """The same scales, with at least the drawing's doubt."""
    drawn = Calibration.without()

    def wider(scale: Scale, other: Scale) -> Scale:
        return replace(scale, u_rel=max(scale.u_rel, other.u_rel))

    wide, fine = (wider(a, b) for a, b in zip(calibration.volts, drawn.volts, strict=True))
    supply_wide, supply_fine = (wider(a, b) for a, b in zip(calibration.supply, drawn.supply, strict=True))
    amps = {level: wider(scale, drawn.amps[level]) for level, scale in calibration.amps.items()}
    return replace(calibration, volts=(wide, fine), supply=(supply_wide, supply_fine), amps=amps)
