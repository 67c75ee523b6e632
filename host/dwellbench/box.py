"""One box: who it is, what it is doing, and running a plan on it.

with Box("emu://film") as box:
    run = box.start(plan)
    for happening in run:          # samples, state, fault, done, log, in order, none missing
        ...
    raw = run.raw()
"""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from dwellbench.errors import DwellbenchError, FaultError, LinkError, StoppedError, UsageError
from dwellbench.measure.calibrate import calibrate
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.trace import Trace
from dwellbench.plan import Plan, Ratings
from dwellbench.run import EVENT_S, Run, stopped, unproven
from dwellbench.wire.conversation import Conversation
from dwellbench.wire.core import Notice
from dwellbench.wire.said import fault
from dwellbench.wire.schemas import compile_all

_ENDED_BY_ABORT = ("charge", "dwell", "measure", "form", "recovery")
WAKE_S = 180.0  # proving discharge after power-up takes half a minute at most

LID_S = 300.0  # somebody is asked to open the lid
_PAGE = 180  # letters; with every one escaped a request still fits a line of 512 bytes


@dataclass(frozen=True)
class Identity:
    """Who the box is, as it said itself."""

    box: str
    model: str
    firmware: str
    build: str
    boot: int
    ratings: Ratings
    fault: str | None = None
    simulated: bool = False
    hello: dict[str, Any] = field(default_factory=dict)

    @classmethod
    def from_hello(cls, hello: dict[str, Any]) -> Identity:
        """Take the answer to `hello`."""
        return cls(
            box=hello["box"],
            model=hello["model"],
            firmware=hello["firmware"],
            build=hello["build"],
            boot=hello["boot"],
            ratings=Ratings.from_hello(hello["ratings"]),
            fault=hello["fault"],
            simulated=bool(hello.get("emulated", False)),
            hello=hello,
        )


class Box(Conversation):
    """A connected box. Use it as a context manager, or close it."""

    @property
    def identity(self) -> Identity:
        """Who it is, as it said when it was last connected."""
        return Identity.from_hello(self.hello)

    @property
    def ratings(self) -> Ratings:
        """What the box says it can do."""
        return self.identity.ratings

    def status(self) -> dict[str, Any]:
        """What is on the part, whether it may be touched, and what is happening."""
        return self.ask("status")

    def abort(self) -> None:
        """Stop the run: supply off, bleed on."""
        self.ask("abort")

    def finish(self) -> None:
        """End the dwell early, in order."""
        self.ask("finish")

    def acknowledge(self, *, shorted: bool = False) -> None:
        """Take note of the latched reason. `shorted`: charge that was missing has been removed with a shorting stick."""
        self.ask("acknowledge", {"shorted": True} if shorted else {})

    def pages(self, of: str) -> str:
        """The box's `settings` or `calibration` as text, "" when it has none."""
        first = self.ask("settings", {"of": of, "page": 0})
        parts = [first["text"]]
        for page in range(1, first["pages"]):
            parts.append(self.ask("settings", {"of": of, "page": page})["text"])
        return "".join(parts)

    def calibration(self) -> dict[str, Any] | None:
        """The calibration that the box carries, None when it has none or it cannot be read."""
        text = self.pages("calibration")
        try:
            data = json.loads(text) if text else None
        except ValueError:
            return None
        return data if isinstance(data, dict) else None

    def write_pages(self, of: str, document: dict[str, Any]) -> None:
        """Keep a document (`settings` or `calibration`) in the box, which takes it at rest with the lid open only.

        Raises RefusedError with the box's own reason, and LinkError when what it then has is something else.
        """
        text = json.dumps(document, separators=(",", ":"))
        pages = [text[at : at + _PAGE] for at in range(0, len(text), _PAGE)]
        for page, piece in enumerate(pages):
            self.ask("settings", {"of": of, "page": page, "pages": len(pages), "text": piece})
        if self.pages(of) != text:
            raise LinkError(f"The box did not keep its {of} as it was sent.", remedy="Send it again.")

    def wait_for_open_lid(self, seconds: float = LID_S) -> None:
        """Wait until the box is at rest with its lid open. UsageError when nobody opens it."""
        if self.wait_for(lambda now: now["state"] == "rest" and now["lid"] == "open", seconds) is None:
            raise UsageError(
                "The lid was not opened, so nothing was written to the box.",
                remedy="Run it again, and open the lid.",
            )

    # -- waiting

    def wait_for(
        self, done: Callable[[dict[str, Any]], bool], seconds: float, every: float = 0.25
    ) -> dict[str, Any] | None:
        """Ask for the status until `done(status)`; return it, or None when the time is over."""
        until = self.clock() + seconds
        while True:
            status = self.status()
            if done(status):
                return status
            if self.clock() >= until:
                return None
            self.rest(every)

    def settle(self, seconds: float = WAKE_S) -> dict[str, Any]:
        """Wait until the box is at rest with the part discharged. FaultError when it is locked out or does not get there.

        A run that an earlier host left behind is stopped first: asking how it goes would keep it alive.
        """
        self.know_again()
        if self.status()["state"] in _ENDED_BY_ABORT:
            self.abort()
        status = self.wait_for(lambda now: now["state"] in ("rest", "lockout"), seconds)
        if status is None:
            raise FaultError(
                "The box has not proven the part discharged.", remedy="Leave the lid closed and wait."
            )
        if status["state"] == "lockout":
            raise fault(status["fault"] or "not_discharged")
        return status

    # -- running

    def start(self, plan: Plan) -> Run:
        """Begin a run and return it; iterate to follow. Raises RefusedError with the box's own reason.

        A plan with the run_key of the run that is under way, or that ended last, begins nothing: that run is taken up, with what
        the box still keeps of it from its beginning.
        """
        self.know_again()
        compile_all()
        status = self.status()
        again = status["run_key"] == plan.run_key
        try:
            answer = self.ask("run", plan.to_wire())
        except KeyboardInterrupt:
            raise self._stopped() from None
        self.keepalive = True
        run = Run(self, plan, answer["run"], answer["estimate_ms"] / 1e3)
        if again:
            run.take_up(self._kept(status["n"]))
        else:
            self._inbox.skip_to(status["n"])  # what came before belongs to another run
        return run

    def _stopped(self) -> StoppedError:
        """Interrupted over the question, so that nobody knows whether it began: it is stopped in either case."""
        try:
            self.settle()
        except KeyboardInterrupt:
            return unproven()
        return stopped()

    def _kept(self, n: int) -> list[Notice]:
        """The events before `n` that the box keeps of its last run."""
        came: list[Notice] = []
        self._inbox.begin_at(0)
        self.expect(n)
        while self._inbox.next_n < n or self._inbox.ready:
            if not self.next_event(EVENT_S, came.append):
                raise LinkError("The box does not send what it kept of this run.", remedy="Try again.")
        begins = [
            at for at, one in enumerate(came) if one.params.get("state") == "charge" and one.method == "state"
        ]
        if not begins:
            return came  # its beginning has been written over
        self._inbox.skip_to(n)  # what is gone was not this run's
        return came[begins[-1] :]

    def run(self, plan: Plan) -> Trace:
        """Run to the end and return the trace in volts and amperes. Raises FaultError when a fault ended it.

        The error of a run that did not come to its end carries what had been measured (`measured`, a RawTrace).
        """
        calibration = self.stored_calibration()
        run = self.start(plan)
        try:
            for _ in run:
                pass
            run.raise_fault()
        except DwellbenchError as error:
            run.carried_by(error)
            raise
        return calibrate(run.raw(), calibration)

    def stored_calibration(self) -> Calibration | None:
        """The box's calibration, checked, or None."""
        data = self.calibration()
        return None if data is None else Calibration.from_json(data)
