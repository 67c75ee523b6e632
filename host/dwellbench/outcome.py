"""What came of one test: the document that scripts read, with the two answers' one verdict, its evidence and
what was not tested.

The layout is a fixed interface (`outcome.schema.json` beside this file states it). Whatever was not
determined is null: an outcome never shows a number that was not measured.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

from dwellbench.limits.decide import FIT, UNDECIDED, UNFIT, VERDICTS
from dwellbench.measure.budget import Budget
from dwellbench.part import Part
from dwellbench.quantity import Quantity

SCHEMA = 1

__all__ = ["FIT", "UNDECIDED", "UNFIT", "VERDICTS", "Finding", "LimitResult", "Outcome", "Suit"]

NEXTS = ("use", "use_up_to", "re_form_then_test", "clean_and_retest", "check_esr", "other_place", "scrap")
"""What to do next; `undecided` may have none of them (null), then `to_decide` says what is needed."""

EXIT_STATUS = {FIT: 0, UNFIT: 3, UNDECIDED: 4}

QUANTITIES = (
    "capacitance_F",
    "total_current_A",
    "leakage_A",
    "insulation_ohm",
    "time_constant_s",
    "absorption_ratio",
    "polarisation_index",
    "recovery_percent",
    "grid_shift_V",
)


@dataclass(frozen=True)
class Finding:
    """Something seen, by its id, with the evidence in one sentence."""

    id: str
    evidence: str

    def as_json(self) -> dict[str, Any]:
        """The interface's object."""
        return {"id": self.id, "evidence": self.evidence}


@dataclass(frozen=True)
class LimitResult:
    """One limit as it stood for this part: `value` in `unit`, whose word it is (`source`, `status`), and how
    it went.

    `p_conform` is the probability that the part conforms (JCGM 106), None where nothing was measured for it.
    `reached` is False when the box cannot tell at this limit (its own doubt there is as large as the limit),
    or cannot hold the voltage.
    """

    id: str
    quantity: str
    value: float | None
    unit: str
    grade: str
    source: str
    status: str
    p_conform: float | None
    reached: bool

    def as_json(self) -> dict[str, Any]:
        """The interface's object."""
        return {name: getattr(self, name) for name in _LIMIT_MEMBERS}


_LIMIT_MEMBERS = ("id", "quantity", "value", "unit", "grade", "source", "status", "p_conform", "reached")


@dataclass(frozen=True)
class Suit:
    """A place that the part suits (up to these numbers), or does not (at these)."""

    role: str
    up_to_V: float | None
    series_ohm: float | None

    def as_json(self) -> dict[str, Any]:
        """The interface's object."""
        return {"role": self.role, "up_to_V": self.up_to_V, "series_ohm": self.series_ohm}


@dataclass(frozen=True)
class Outcome:
    """One outcome. SI units; `as_json` is the fixed document, `from_json` reads it back."""

    part: Part
    role: str | None
    grade: str
    verdict: str
    reason: str
    next: str | None = None
    to_decide: str | None = None
    findings: tuple[Finding, ...] = ()
    limits: tuple[LimitResult, ...] = ()
    suits: tuple[Suit, ...] = ()
    not_for: tuple[Suit, ...] = ()
    valid_to_V: float | None = None
    not_tested: tuple[str, ...] = ()
    test_V: float | None = None
    dwell_s: float | None = None
    dwell_complete: bool = False
    temperature_C: float | None = None
    humidity_percent: float | None = None
    capacitance_F: Quantity | None = None
    total_current_A: Quantity | None = None
    leakage_A: Quantity | None = None
    insulation_ohm: Quantity | None = None
    time_constant_s: Quantity | None = None
    absorption_ratio: Quantity | None = None
    polarisation_index: Quantity | None = None
    recovery_percent: Quantity | None = None
    grid_shift_V: Quantity | None = None
    end: str | None = None
    fault: str | None = None
    assumed: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    record: str | None = None
    run: str | None = None
    time_utc: str | None = None
    box: str | None = None
    firmware: str | None = None
    calibration: str | None = None
    simulated: bool = False
    schema: int = field(default=SCHEMA)
    budgets: dict[str, Budget] = field(default_factory=dict, compare=False, repr=False)

    @property
    def exit_status(self) -> int:
        """0 fit, 3 unfit, 4 undecided."""
        return EXIT_STATUS[self.verdict]

    def found(self, finding_id: str) -> bool:
        """Say whether a finding of this id is among the findings."""
        return any(finding.id == finding_id for finding in self.findings)

    def stamped(self, **members: Any) -> Outcome:
        """The same outcome with members such as `record`, `run`, `time_utc` or `box` filled in."""
        return replace(self, **members)

    def as_json(self, *, budgets: bool = False) -> dict[str, Any]:
        """The document as JSON values, members in the interface's order; `budgets` only when they are asked for."""
        document: dict[str, Any] = {name: getattr(self, name) for name in _HEAD}
        document["part"] = self.part.as_json()
        document.update(
            (name, getattr(self, name)) for name in ("role", "grade", "verdict", "reason", "next")
        )
        document["findings"] = [finding.as_json() for finding in self.findings]
        document.update((name, getattr(self, name)) for name in _CONDITIONS)
        for name in QUANTITIES:
            quantity: Quantity | None = getattr(self, name)
            document[name] = None if quantity is None else quantity.as_json()
        document["limits"] = [limit.as_json() for limit in self.limits]
        document["suits"] = [suit.as_json() for suit in self.suits]
        document["not_for"] = [suit.as_json() for suit in self.not_for]
        document.update(
            valid_to_V=self.valid_to_V, not_tested=list(self.not_tested), to_decide=self.to_decide
        )
        document.update(end=self.end, fault=self.fault, assumed=list(self.assumed), notes=list(self.notes))
        if budgets:
            document["budgets"] = {
                name: [line.as_json() for line in rows] for name, rows in self.budgets.items()
            }
        return document

    @classmethod
    def from_json(cls, document: dict[str, Any], part: Part) -> Outcome:
        """Read a document back. `part` is the part it was made for (the document keeps less of it than a Part
        has).
        """
        members: dict[str, Any] = {name: document.get(name) for name in (*_HEAD, *_PLAIN, *_CONDITIONS)}
        members["findings"] = tuple(Finding(**row) for row in document["findings"])
        members["limits"] = tuple(LimitResult(**row) for row in document["limits"])
        members["suits"] = tuple(Suit(**row) for row in document["suits"])
        members["not_for"] = tuple(Suit(**row) for row in document["not_for"])
        for name in ("not_tested", "assumed", "notes"):
            members[name] = tuple(document.get(name) or ())
        for name in QUANTITIES:
            value = document.get(name)
            members[name] = None if value is None else Quantity.from_json(value)
        return cls(part=part, **members)


_HEAD = ("schema", "record", "run", "time_utc", "box", "firmware", "calibration", "simulated")
_PLAIN = ("role", "grade", "verdict", "reason", "next", "to_decide", "end", "fault", "valid_to_V")
_CONDITIONS = ("test_V", "dwell_s", "dwell_complete", "temperature_C", "humidity_percent")
