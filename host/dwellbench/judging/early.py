"""When a dwell may end before its time: the verdict of the whole dwell is certain enough already.

Why it can be: the current of a sound part only falls, so what flows now bounds what will flow then; and a part whose least
possible conduction misses the limit will miss it then.

What it risks, and says: statistics need only a few seconds for steady leaks, but a part that begins to leak late is not
seen. If a share q of the bad parts starts at a random time within the minute, ending at t passes q (1 - t / 60) of them. So
never before ten seconds, never with any sign of activity, never for paper, electrolytics or unknown kinds, which change
slowly, and the outcome says that the dwell was cut short.
"""

from __future__ import annotations

from dataclasses import dataclass

from dwellbench.limits.decide import FIT, UNDECIDED, Thresholds
from dwellbench.limits.place import Place
from dwellbench.outcome import Outcome
from dwellbench.part import Part

LEAST_S = 10.0
SURE = Thresholds(0.999, 0.001)
_SLOW = ("paper", "electrolytic", "tantalum", None)
_ACTIVITY = (
    "intermittent",
    "burst",
    "rising",
    "charging",
    "negative_current",
    "superlinear",
    "sag",
    "unsettled",
    "clipped",
)


@dataclass(frozen=True)
class Early:
    """The verdict that is certain, and the sentence that says so."""

    verdict: str
    why: str


def early(now: Outcome, part: Part, place: Place | None) -> Early | None:
    """Say whether the dwell may end by `now`, the outcome of what has come so far, judged by `stricter` thresholds as a
    run that was `finished`; None: hold on."""
    if part.dielectric in _SLOW or (place is not None and (place.never_fit or place.beyond_box)):
        return None
    if now.verdict == UNDECIDED or now.dwell_s is None or now.dwell_s < LEAST_S:
        return None
    if now.verdict == FIT and _active(now):
        return None
    sure = "will pass" if now.verdict == FIT else "cannot pass any more"
    return Early(
        now.verdict, f"After {now.dwell_s:.0f} s the part {sure} by its limits; later leaks are not seen."
    )


def stricter(thresholds: Thresholds | None) -> Thresholds:
    """What counts as certain: the user's own thresholds where they ask for more."""
    if thresholds is None:
        return SURE
    return Thresholds(max(thresholds.accept, SURE.accept), min(thresholds.reject, SURE.reject))


def _active(outcome: Outcome) -> bool:
    return any(finding.id in _ACTIVITY for finding in outcome.findings)
