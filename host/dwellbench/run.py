"""One run as it goes: its events in order, what has been measured so far, and how it ended.

Iterating follows the run until the box is at rest with the part proven discharged, or locked out. Stopping it (Ctrl-C, or
`stop()`) sends an abort and goes on following until then: nothing that was measured is dropped, and the part is safe when the
call returns, unless `proven` says otherwise: then the box still holds the lid locked.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterator
from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

from dwellbench.errors import DwellbenchError, FaultError, LinkError, StoppedError
from dwellbench.measure.raw import RawTrace
from dwellbench.plan import Plan
from dwellbench.wire.conversation import RECONNECT_S
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
        self.while_stopping: Callable[[Notice], None] | None = (
            None  # sees what comes when nobody iterates any more
        )
        self._given: deque[Notice] = deque()

    def __iter__(self) -> Iterator[Notice]:
        while self._given or not self.over:
            try:
                if not self._given:
                    self._next()
                yield self._given[0]
                self._given.popleft()  # only now: whoever was interrupted over it finds it in `unseen`
            except KeyboardInterrupt:
                self._interrupted()

    def take_up(self, kept: list[Notice]) -> None:
        """Begin with what the box kept of this run."""
        for notice in kept:
            self._take(notice)

    def unseen(self) -> list[Notice]:
        """The events that no iteration has gone past, such as came while the run was being stopped.

        The first may be the one that was given last, if whoever iterated was interrupted over it.
        """
        unseen = list(self._given)
        self._given.clear()
        return unseen

    def _next(self) -> None:
        """Take the next event. After an error there is none, and no sign of life keeps the run going."""
        try:
            self._follow()
        except DwellbenchError:
            self._finish()
            raise

    def _follow(self) -> None:
        """Take the next event; none for a while means that the box is asked whether it is still at it."""
        until = self._box.clock() + SAFE_S
        while self._box.clock() < until:
            came = self._box.next_event(EVENT_S, self._take)
            status = None if came or self._box.restarted else self._asked()
            if self._box.restarted or (status and status["boot"] != self._box.identity.boot):
                self._box.restarted = True
                raise _restarted()
            if status is None:
                return
            if status["run"] != self.number:
                break
            self._box.expect(status["n"])
        raise LinkError(
            "The box says nothing more of this run.", remedy="See what it is doing with: dwellbench box."
        )

    def _asked(self) -> dict[str, Any]:
        """The status of a box that has fallen silent: asked again for half a minute, for it keeps what it measured."""
        until = self._box.clock() + RECONNECT_S
        while True:
            try:
                return self._box.status()
            except LinkError:
                if self._box.clock() >= until:
                    raise

    def _take(self, notice: Notice) -> None:
        params = notice.params
        self._given.append(notice)
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
            self._next()
            self._tell()

    def _tell(self) -> None:
        if self.while_stopping is None or not self._given:
            return
        try:
            self.while_stopping(self._given[-1])
        except Exception:  # whoever watches must not keep the part from being seen discharged
            self.while_stopping = None

    def _interrupted(self) -> None:
        try:
            self.stop()
        except KeyboardInterrupt:
            raise unproven() from None
        raise self.stopped()

    def stopped(self) -> DwellbenchError:
        """What to raise after `stop`: that the user stopped it, but first of all what may still be on the part."""
        if self.fault is not None or not self.proven:
            return fault_error(self.fault or "not_discharged")
        return stopped()

    # -- what came of it

    def carried_by(self, error: BaseException) -> None:
        """Let an error that ends the run carry what had been measured."""
        if isinstance(error, DwellbenchError):
            error.measured = self.raw()

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
