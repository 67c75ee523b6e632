"""One run as it goes: its events in order, what has been measured so far, and how it ended.

Iterating follows the run until the box is at rest with the part proven discharged, or locked out. Stopping it (Ctrl-C, or
`stop()`) sends an abort and goes on following until then: nothing that was measured is dropped, and the part is safe when the
call returns, unless `proven` says otherwise: then the box still holds the lid locked.
"""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

from dwellbench.errors import FaultError, LinkError, StoppedError
from dwellbench.measure.raw import RawTrace
from dwellbench.plan import Plan
from dwellbench.wire.core import Notice
from dwellbench.wire.said import fault as fault_error

if TYPE_CHECKING:
    from dwellbench.box import Box

EVENT_S = 5.0  # samples come ten times a second while a run is under way
SAFE_S = 120.0  # the longest the box takes to prove discharge, whatever happened


class Run:
    """`rows`, `end`, `fault` and `done` fill as it goes."""

    def __init__(self, box: Box, plan: Plan, number: int, estimate_s: float) -> None:
        self._box = box
        self.plan = plan
        self.number = number
        self.estimate_s = estimate_s
        self.began_utc = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
        self.rows: list[list[int]] = []
        self.state = "charge"
        self.stage = "zero"
        self.end: str | None = None
        self.fault: str | None = None
        self.done: dict[str, Any] = {}
        self.over = False
        self.proven = False  # the part was proven discharged when it was over
        self._ended_s = 0.0
        self._stopping = False
        self._unseen: list[Notice] = []

    def __iter__(self) -> Iterator[Notice]:
        while not self.over:
            try:
                yield self._next()
            except KeyboardInterrupt:
                self._interrupted()

    def unseen(self) -> list[Notice]:
        """The events that came while the run was being stopped, and that no iteration has given."""
        unseen, self._unseen = self._unseen, []
        return unseen

    def _next(self) -> Notice:
        """The next event; none for a while means that the box is asked whether it is still at it."""
        waited = 0.0
        while waited < SAFE_S:
            notice = self._box.next_event(EVENT_S)
            if self._box.restarted:
                self._finish()
                raise _restarted()
            if notice is not None:
                self._take(notice)
                return notice
            waited += EVENT_S
            status = self._box.status()
            if status["boot"] != self._box.identity.boot:
                self._finish()
                raise _restarted()
            if status["run"] != self.number:
                break
            self._box.expect(status["n"])
        raise LinkError(
            "The box says nothing more of this run.", remedy="See what it is doing with: dwellbench box."
        )

    def _take(self, notice: Notice) -> None:
        params = notice.params
        if notice.method == "samples":
            self.rows.extend(params["rows"])
        elif notice.method == "state":
            self.state, self.stage = params["state"], params["stage"]
            proven = params["state"] == "lockout" and params["why"] == "discharge proven"
            if self.end is not None and (params["state"] == "rest" or proven):
                self.proven = True
                self._finish()
        elif notice.method == "fault":
            self.fault = self.fault or params["fault"]
        elif notice.method == "done" and params["run"] == self.number:
            self.done = params
            self.end = params["end"]
            self.fault = params["fault"] or self.fault
            self._ended_s = self._box.clock()
        if self.end is not None and not self.over and self._box.clock() - self._ended_s > SAFE_S:
            self._finish()  # the box goes on bleeding and keeps the lid locked; nothing is gained by waiting here

    def _finish(self) -> None:
        self.over = True
        self._box.keepalive = False

    # -- stopping

    def stop(self) -> None:
        """Abort, and follow until the part is proven discharged. Raises LinkError when the box cannot be reached."""
        if self.over:
            return
        if not self._stopping:
            self._stopping = True
            self._box.abort()
        while not self.over:
            self._unseen.append(self._next())

    def _interrupted(self) -> None:
        try:
            self.stop()
        except KeyboardInterrupt:
            raise unproven() from None
        raise stopped()

    # -- what came of it

    def raw(self) -> RawTrace:
        """The rows so far, with what is known of the run."""
        identity = self._box.identity
        info: dict[str, Any] = {
            "run": self.number,
            "run_key": self.plan.run_key,
            "box": identity.box,
            "firmware": identity.firmware,
            "boot": identity.boot,
            "simulated": identity.simulated,
            "end": self.end,
            "fault": self.fault,
            "asked_V": self.plan.volts_V,
            "dwell_asked_s": self.plan.dwell_s,
            "time_utc": self.began_utc,
        }
        info.update(
            {
                name: self.done[name]
                for name in ("look_pf", "short_mv", "short_na", "residual_mv")
                if name in self.done
            }
        )
        return RawTrace.from_rows(self.rows, info)

    def raise_fault(self) -> None:
        """Raise FaultError if a fault ended the run."""
        if self.end == "fault":
            raise fault_error(self.fault or "board")


def _restarted() -> FaultError:
    return FaultError(
        "The box was restarted during the run.",
        remedy="It proves the part discharged by itself; see: dwellbench box.",
        fault="reset_in_run",
    )


def stopped() -> StoppedError:
    """The user stopped it, and the part is discharged."""
    return StoppedError("Stopped by the user; the part is discharged.", remedy="", proven=True)


def unproven() -> StoppedError:
    """The user would not wait."""
    return StoppedError(
        "Stopped without waiting for the box.",
        remedy="The box goes on by itself: it empties the part and keeps the lid locked until that is proven.",
        proven=False,
    )
