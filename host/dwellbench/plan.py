"""Part, place and ratings become a plan: which voltage, for how long, and what the box must know beforehand.

The voltage: what the user asked, else the place's when the role names one, else the part's own DC rating,
held down to what the box can do. A target above the box is refused here, because the box would refuse it;
everything else the box decides.

No current ceiling is set: the charge path limits what can be turned into heat in the part to V^2 / (4 x 400
kohm), 0.26 W at 650 V, less than what a small can or a film part stands for minutes.
"""

from __future__ import annotations

import secrets
from dataclasses import dataclass
from math import ceil, isfinite
from typing import Any

from dwellbench.errors import UsageError
from dwellbench.limits.place import Place
from dwellbench.part import Part

GRADES = ("new", "period", "aged")

_CHARGE_OHM = 400e3  # of the reference box; only the estimate of the time uses it
_FORMED = ("electrolytic", "tantalum")
_ABSORBING = ("paper", "electrolytic", "tantalum")

# Seconds at voltage: film by IEC 60384-1 practice 60 s; electrolytics 2 min (makers' sheets), 5 min
# (MIL-C-62F 4.5.3).
_DWELL_S = {
    "new": {"electrolytic": 120.0, "tantalum": 300.0},
    "period": {"electrolytic": 300.0, "tantalum": 300.0},
}
_DWELL_S["aged"] = _DWELL_S["period"]
_DWELL_USUAL_S = 60.0

# How far the value at 20 V may be from the marking before the run ends: a misread marking, not a matter of
# tolerance.
_OFF_PCT = {"electrolytic": (80, 200), "tantalum": (70, 200), "ceramic_2": (70, 150), "ceramic": (70, 150)}
_OFF_USUAL_PCT = (50, 100)

_BLEED_LEAST_S = 10.0
_BLEED_SHARE = 0.1
_LEAST_V = 1.0


@dataclass(frozen=True)
class Ratings:
    """What the box says it can do. Volts, joules, farads, seconds."""

    volts_V: float = 650.0
    energy_J: float = 50.0
    capacitance_F: float = 500e-6
    dwell_s: float = 3600.0

    @classmethod
    def from_hello(cls, ratings: dict[str, Any]) -> Ratings:
        """Take the `ratings` object of the box's answer to `hello`."""
        return cls(
            volts_V=ratings["volts_mv"] / 1e3,
            energy_J=ratings["energy_mj"] / 1e3,
            capacitance_F=ratings["capacitance_nf"] * 1e-9,
            dwell_s=ratings["dwell_ms"] / 1e3,
        )


@dataclass(frozen=True)
class Plan:
    """One run as it is asked of the box. `recovery_s` 0: the rebound is not watched. `fixture`: nothing is
    fitted.
    """

    run_key: str
    volts_V: float
    dwell_s: float
    expect_F: float | None = None
    tolerance: tuple[float, float] | None = None
    polar: bool = False
    ceiling_A: float = 0.0
    bleed_s: float = _BLEED_LEAST_S
    recovery_s: float = 0.0
    nudge: bool = True
    fixture: bool = False
    low_pct: int = 0
    high_pct: int = 0
    reasons: tuple[str, ...] = ()

    @classmethod
    def make(
        cls,
        part: Part,
        place: Place | None,
        ratings: Ratings,
        *,
        volts: float | None = None,
        dwell: float | None = None,
        grade: str = "new",
        recovery: float = 0.0,
        run_key: str | None = None,
    ) -> Plan:
        """Choose voltage and times. Raises UsageError when no voltage can be chosen, or the target is above
        box or part.
        """
        if grade not in GRADES:
            raise UsageError(f"{grade!r} is not a grade.", remedy=f"Use one of: {', '.join(GRADES)}.")
        target, why = target_volts(part, place, ratings, volts)
        dwell_s, why_dwell = _dwell(part, grade, dwell, ratings)
        low, high = _OFF_PCT.get(part.dielectric or "", _OFF_USUAL_PCT) if part.capacitance_F else (0, 0)
        return cls(
            run_key=run_key or secrets.token_hex(8),
            volts_V=target,
            dwell_s=dwell_s,
            expect_F=part.capacitance_F,
            tolerance=part.tolerance,
            polar=part.polar,
            bleed_s=_bleed(part, dwell_s),
            recovery_s=recovery,
            low_pct=low,
            high_pct=high,
            reasons=(why, why_dwell),
        )

    @classmethod
    def empty(cls, ratings: Ratings, volts: float, dwell: float) -> Plan:
        """The empty fixture's own leakage. Raises UsageError for what the box cannot give."""
        nothing = Part("empty fixture", dielectric="vacuum")
        target, why = target_volts(nothing, None, ratings, volts)
        dwell_s, why_dwell = _dwell(nothing, "new", dwell, ratings)
        return cls(secrets.token_hex(8), target, dwell_s, fixture=True, reasons=(why, why_dwell))

    def to_wire(self) -> dict[str, Any]:
        """The parameters of the `run` request, whole numbers in the wire's units."""
        return {
            "run_key": self.run_key,
            "volts_mv": round(self.volts_V * 1e3),
            "dwell_ms": round(self.dwell_s * 1e3),
            "expect_pf": round((self.expect_F or 0.0) * 1e12),
            "low_pct": self.low_pct,
            "high_pct": self.high_pct,
            "polar": self.polar,
            "ceiling_ua": ceil(self.ceiling_A * 1e6),
            "bleed_ms": round(self.bleed_s * 1e3),
            "recovery_ms": round(self.recovery_s * 1e3),
            "nudge": self.nudge,
            **({"fixture": True} if self.fixture else {}),  # a box of before knows no such parameter
        }

    def estimate_s(self) -> float:
        """About how long the run takes: checks, charge, dwell, account, bleed and proof. The box's own answer
        is better.
        """
        tau_s = _CHARGE_OHM * (self.expect_F or 0.0)
        charge_s = 6.0 * tau_s if tau_s >= 0.1 else self.volts_V / 100.0
        return 7.0 + min(tau_s, 15.0) + charge_s + self.dwell_s + 4.0 + self.bleed_s + self.recovery_s

    def explain(self) -> list[str]:
        """The plan in sentences, for people who want to know before anything is energised."""
        told = list(self.reasons)
        told.append(f"The part is bled for at least {self.bleed_s:g} s and until it reads below 30 V.")
        if self.recovery_s:
            told.append(f"Then the bleed opens for {self.recovery_s:g} s to watch the absorption rebound.")
        if self.expect_F and self.low_pct:
            told.append(
                f"The run ends at 20 V if the value there is more than {self.low_pct} % below or "
                f"{self.high_pct} % above the marking."
            )
        if self.polar:
            told.append("The part is polar: its positive lead goes to the marked clip.")
        stored_J = 0.5 * (self.expect_F or 0.0) * self.volts_V**2
        if self.expect_F:
            told.append(f"Charged, it holds {stored_J:.3g} J ({self.expect_F * self.volts_V * 1e6:.3g} uC).")
        told.append(f"It takes about {self.estimate_s():.0f} s.")
        return told


def target_volts(part: Part, place: Place | None, ratings: Ratings, volts: float | None) -> tuple[float, str]:
    """Choose the voltage on the part, and the sentence that says why. Raises UsageError."""
    if volts is not None:
        return _checked(part, ratings, volts, "asked for")
    if place is not None and place.given_V is not None:
        return _checked(part, ratings, place.given_V, f"the place's ({place.role})")
    if part.rated_V is None:
        return _unrated(place, ratings)
    if part.rated_kind == "ac":
        raise UsageError(
            f"{part.marking!r} states an AC rating, which does not say what DC voltage the part stands.",
            remedy="Give the DC test voltage with --volts, or the place's with --role PLACE@VOLTS.",
        )
    if part.rated_V > ratings.volts_V:
        why = (
            f"Tested at {ratings.volts_V:g} V, the most this box gives; the part is rated {part.rated_V:g} V."
        )
        return ratings.volts_V, why
    return part.rated_V, f"Tested at {part.rated_V:g} V, the part's DC rating."


def _checked(part: Part, ratings: Ratings, volts: float, whose: str) -> tuple[float, str]:
    """A voltage that somebody named: it must fit the box and the part."""
    if not isfinite(volts) or volts < _LEAST_V:
        raise UsageError(f"{volts:g} V is no test voltage.", remedy=f"Give at least {_LEAST_V:g} V.")
    if volts > ratings.volts_V:
        raise UsageError(
            f"{volts:g} V, the voltage {whose}, is above this box's {ratings.volts_V:g} V.",
            remedy="Test at a lower voltage with --volts; the outcome then holds up to that voltage only.",
        )
    if part.rated_V is not None and part.rated_kind == "dc" and volts > part.rated_V:
        raise UsageError(
            f"{volts:g} V, the voltage {whose}, is above the part's rating of {part.rated_V:g} V.",
            remedy=f"Choose a part rated {volts:g} V or more, or test at {part.rated_V:g} V or less.",
        )
    return volts, f"Tested at {volts:g} V, the voltage {whose}."


def _unrated(place: Place | None, ratings: Ratings) -> tuple[float, str]:
    """No rating on the part: the place's usual voltage, when there is one that the box can give."""
    if place is not None and place.volts_V is not None and place.volts_V <= ratings.volts_V:
        usual = place.volts_V
        return usual, f"No rating is marked; tested at {usual:g} V, usual for the place {place.kind.id}."
    raise UsageError(
        "No voltage rating is marked, so no test voltage can be chosen.",
        remedy="Give the voltage with --volts, or the place's with --role PLACE@VOLTS.",
    )


def _dwell(part: Part, grade: str, dwell: float | None, ratings: Ratings) -> tuple[float, str]:
    """Time of electrification in seconds, and why."""
    if dwell is not None:
        if not 0.2 <= dwell <= ratings.dwell_s:
            remedy = f"Choose 0.2 to {ratings.dwell_s:g} s."
            raise UsageError(f"A dwell of {dwell:g} s is not possible on this box.", remedy=remedy)
        return dwell, f"Held for {dwell:g} s, as asked for."
    usual = min(_DWELL_S[grade].get(part.dielectric or "", _DWELL_USUAL_S), ratings.dwell_s)
    return usual, f"Held for {usual:g} s, the usual time for such a part (grade {grade})."


def _bleed(part: Part, dwell_s: float) -> float:
    """Seconds of bleeding: a tenth of the time at voltage if it absorbs, at least ten seconds."""
    share = _BLEED_SHARE * dwell_s if part.dielectric in _ABSORBING or part.dielectric is None else 0.0
    return max(_BLEED_LEAST_S, share)
