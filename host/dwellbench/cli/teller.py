"""A run told in sentences, the way a colleague at the bench would: what is on the part, whether it may be touched, what is
happening, how long it still takes, what comes next.

Volts here are nominal, for people at the bench; what is judged goes through the calibration.
"""

from __future__ import annotations

from dataclasses import dataclass

from dwellbench.plan import Plan
from dwellbench.run import Run
from dwellbench.wire.codes import names
from dwellbench.wire.core import Notice

SAFE_V = 30.0
STOPPING = (
    "Stopping: the box empties the part and proves it. A second Ctrl-C leaves without waiting for that."
)
_VOLTS_A_CODE = (1.024 / 32768 * 1001, 0.256 / 32768 * 1001)
_STAGE, _NV, _SV, _VRANGE, _T = 2, 5, 6, 17, 1


@dataclass(frozen=True)
class Told:
    """Four sentences."""

    on_part: str
    doing: str
    left: str
    following: str

    def lines(self) -> list[str]:
        """Those that say something."""
        return [line for line in (self.on_part, self.doing, self.left, self.following) if line]


class Teller:
    """Feed it the events of a run; `told()` says how things stand."""

    def __init__(self, plan: Plan, estimate_s: float) -> None:
        self._plan = plan
        self._estimate_s = estimate_s
        self.volts = 0.0
        self.stage = "zero"
        self.state = "charge"
        self.stopping = False
        self._t_ms = 0
        self._stage_ms = 0
        self._proven = False

    def take(self, notice: Notice, run: Run) -> bool:
        """Take an event; say whether the stage has changed."""
        before = self.stage, self.state
        if notice.method == "samples":
            row = notice.params["rows"][-1]
            self.stage, self._t_ms = names("stages")[row[_STAGE]], row[_T]
            if row[_NV]:
                self.volts = row[_SV] / row[_NV] * _VOLTS_A_CODE[row[_VRANGE]]
        elif notice.method == "state":
            self.state, self.stage, self._t_ms = (
                notice.params["state"],
                notice.params["stage"],
                notice.params["t"],
            )
            self._proven = self.state == "rest" or notice.params["why"] == "discharge proven"
        changed = before != (self.stage, self.state)
        if changed:
            self._stage_ms = self._t_ms
        return changed

    def told(self) -> Told:
        """How things stand now."""
        doing, following = _SENTENCES.get(self.stage, ("", ""))
        target = f"{self._plan.volts_V:.0f} V"
        if self.stopping and not self._proven:
            return Told(self._on_part(), doing.format(target=target), "", STOPPING)
        return Told(
            self._on_part(), doing.format(target=target), self._left(), following.format(target=target)
        )

    def _on_part(self) -> str:
        if self._proven:
            return "The part is discharged, and that is proven."
        if abs(self.volts) >= SAFE_V:
            return f"{self.volts:.0f} V on the part, hands off."
        return f"{max(self.volts, 0.0):.0f} V on the part, not proven safe: hands off."

    def _left(self) -> str:
        gone_s = (self._t_ms - self._stage_ms) / 1000
        if self.stage == "dwell":
            return f"{max(0.0, self._plan.dwell_s - gone_s):.0f} s of holding left."
        if self.stage == "discharge" and not self._proven:
            return f"At least {max(0.0, self._plan.bleed_s - gone_s):.0f} s of emptying left."
        if self._proven:
            return ""
        return f"About {max(1.0, self._estimate_s - self._t_ms / 1000):.0f} s until it is over."


# stage: (what is happening, what comes next)
_SENTENCES = {
    "zero": ("Reading the instrument's own zero.", "Next it proves the way down."),
    "prove": ("Proving the way down, at a few volts on the part.", "Next a first look at 20 V."),
    "look": ("First look, at 20 V.", "Next it empties the part through the second bleed, to prove that one."),
    "empty": ("Emptying through the second bleed.", "Next it brings the part to {target}."),
    "charge": ("Bringing the part to {target}.", "Then it holds."),
    "dwell": ("Holding at {target}.", "Then it empties."),
    "measure": ("Accounting for the charge on the part.", "Then it empties."),
    "discharge": ("Emptying.", "Then it proves that the part is discharged."),
    "verify": ("Proving that the part is discharged.", "Then the lid can be opened."),
    "recovery": ("Watching what absorption brings back.", "Then it empties again."),
    "idle": ("At rest.", "Fit a shorting wire before you lift the part out, and store it shorted."),
}
