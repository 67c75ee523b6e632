"""A box, the judge and the store together: one part from its marking to its record.

The record is opened before the box is asked to run, and rows go into it as they arrive, so that whatever happens afterwards
(Ctrl-C, a lost link, a killed program) what was measured is kept. Only a run that came to its end is judged from its readings.
"""

from __future__ import annotations

from dataclasses import asdict
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Protocol

from dwellbench.box import Box
from dwellbench.errors import DwellbenchError, LinkError, StoppedError, UsageError
from dwellbench.judge import judge, may_end
from dwellbench.limits.decide import Thresholds
from dwellbench.limits.place import Place
from dwellbench.measure.calibrate import calibrate
from dwellbench.measure.calibration import Calibration
from dwellbench.outcome import Outcome
from dwellbench.part import Part
from dwellbench.plan import Plan
from dwellbench.records import RunWriter, Store
from dwellbench.run import Run, stopped, unproven
from dwellbench.wire.core import Notice
from dwellbench.wire.wire_log import WireLog

LOOKS = ("sound", "bulged", "leaking", "cracked", "burnt", "corroded")
"""What a part may look like; only a sound one is energised."""


class Watcher(Protocol):
    """Whoever wants to see a run as it goes: the live view, a stream of JSON lines."""

    def began(self, plan: Plan, run: Run) -> None:
        """The box has accepted the plan."""

    def happened(self, notice: Notice, run: Run) -> None:
        """An event came, in order."""


def refuse_looks(looks: str | None) -> None:
    """Raise UsageError for a part that must not be energised because of how it looks."""
    if looks is None or looks == "sound":
        return
    if looks not in LOOKS:
        raise UsageError(
            f"{looks!r} is not a word for how a part looks.", remedy=f"Use one of: {', '.join(LOOKS)}."
        )
    raise UsageError(
        f"A {looks} part is not energised.",
        remedy="Scrap it; bag it if it leaks, and do not open it: old oil-filled parts may hold PCB.",
    )


def test_part(
    box: Box,
    part: Part,
    place: Place | None = None,
    *,
    store: Store | None = None,
    plan: Plan | None = None,
    grade: str = "new",
    label: str | None = None,
    note: str | None = None,
    watcher: Watcher | None = None,
    thresholds: Thresholds | None = None,
    esr_ohm: float | None = None,
    role: str | None = None,
    may_end_early: bool = False,
) -> Outcome:
    """Run, judge and record one part that lies under the closed lid. Returns the outcome, stamped with its record.

    With `may_end_early` the dwell ends as soon as the verdict of the whole dwell is certain enough (see `judge.may_end` for
    what that risks); the outcome then says that it was cut short.

    Raises RefusedError before anything is energised, StoppedError after the user stopped it, LinkError and FaultError; the
    record, if there is a store, is closed with what had been measured in every case.
    """
    plan = plan or Plan.make(part, place, box.ratings, grade=grade)
    document = box.calibration()
    calibration = None if document is None else Calibration.from_json(document)
    began = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    role = role or (place.role if place else None)
    writer = _open(store, box, part, role, grade, plan, document, label, note, began)
    run: Run | None = None
    try:
        run = box.start(plan)
        if watcher is not None:
            watcher.began(plan, run)
        _follow(
            run,
            writer,
            watcher,
            _Ender(box, part, place, grade, calibration, thresholds) if may_end_early else None,
        )
    except BaseException as error:
        reason = _made_safe(run, error)
        _interrupted(writer, run, reason)
        if reason is not error:
            raise reason from None
        raise
    outcome = _judged(run, part, place, grade, calibration, plan, thresholds, esr_ohm)
    outcome = outcome.stamped(**_stamps(box, run, document, role, began, writer))
    if writer is not None:
        writer.end(run.end, run.fault, outcome.as_json())
    return outcome


def _open(
    store: Store | None,
    box: Box,
    part: Part,
    role: str | None,
    grade: str,
    plan: Plan,
    calibration: dict[str, Any] | None,
    label: str | None,
    note: str | None,
    began: str,
) -> RunWriter | None:
    if store is None:
        return None
    identity = box.identity
    return store.begin_run(
        run_key=plan.run_key,
        part=part.as_json(),
        role=role,
        grade=grade,
        plan=asdict(plan),
        box={
            "box": identity.box,
            "model": identity.model,
            "firmware": identity.firmware,
            "build": identity.build,
        },
        calibration=calibration,
        simulated=identity.simulated,
        label=label,
        note=note,
        started_utc=began,
    )


class _Ender:
    """Asks the judge once a second of dwell whether the run may end, and asks the box to finish when it may."""

    def __init__(
        self,
        box: Box,
        part: Part,
        place: Place | None,
        grade: str,
        calibration: Calibration | None,
        thresholds: Thresholds | None,
    ) -> None:
        self._box = box
        self._about = (part, place)
        self._grade = grade
        self._calibration = calibration
        self._thresholds = thresholds
        self._asked_ms = 0
        self._over = False

    def look(self, run: Run) -> None:
        """Look at what has come so far."""
        if self._over or run.state != "dwell" or not run.rows or run.rows[-1][1] - self._asked_ms < 1000:
            return
        self._asked_ms = run.rows[-1][1]
        trace = calibrate(run.raw(), self._calibration)
        if may_end(trace, *self._about, grade=self._grade, thresholds=self._thresholds) is not None:
            self._over = True
            self._box.finish()


def _follow(run: Run, writer: RunWriter | None, watcher: Watcher | None, ender: _Ender | None) -> None:
    """Everything that comes goes into the record first, then to whoever watches."""
    for notice in run:
        if writer is not None:
            record(writer, notice)
        if watcher is not None:
            watcher.happened(notice, run)
        if ender is not None:
            ender.look(run)


def record(writer: RunWriter, notice: Notice) -> None:
    """Write one event."""
    if notice.method == "samples":
        writer.rows(notice.params["rows"])
    else:
        writer.event(notice.method, notice.params)


def _made_safe(run: Run | None, error: BaseException) -> BaseException:
    """Whatever happened on this side while the part was charged: the run is stopped and discharge awaited first."""
    if run is None or run.over or isinstance(error, (LinkError, StoppedError)):
        return error
    try:
        run.stop()
    except (DwellbenchError, KeyboardInterrupt) as second:
        if isinstance(second, KeyboardInterrupt):
            return unproven()
        return second
    return stopped() if isinstance(error, KeyboardInterrupt) else error


def _interrupted(writer: RunWriter | None, run: Run | None, error: BaseException) -> None:
    """Keep what came while the run was being stopped, and say why it ended."""
    if writer is None:
        return
    if run is not None:
        for notice in run.unseen():
            record(writer, notice)
    if run is None:
        why = f"the run did not begin: {_words(error)}"
    elif isinstance(error, (KeyboardInterrupt, StoppedError)):
        why = "stopped by the user"
    else:
        why = _words(error)
    writer.interrupted(why)


def _words(error: BaseException) -> str:
    return error.message if isinstance(error, DwellbenchError) else repr(error)


def _judged(
    run: Run,
    part: Part,
    place: Place | None,
    grade: str,
    calibration: Calibration | None,
    plan: Plan,
    thresholds: Thresholds | None,
    esr_ohm: float | None,
) -> Outcome:
    trace = calibrate(run.raw(), calibration)
    return judge(
        trace,
        part,
        place,
        grade=grade,
        end=run.end,
        fault=run.fault,
        thresholds=thresholds,
        asked_V=plan.volts_V,
        asked_s=plan.dwell_s,
        esr_ohm=esr_ohm,
    )


def _stamps(
    box: Box,
    run: Run,
    calibration: dict[str, Any] | None,
    role: str | None,
    began: str,
    writer: RunWriter | None,
) -> dict[str, Any]:
    return {
        "record": None if writer is None else f"R{writer.id}",
        "run": run.plan.run_key,
        "time_utc": began,
        "box": box.identity.box,
        "firmware": box.identity.firmware,
        "calibration": None if calibration is None else str(calibration.get("id")),
        "simulated": box.identity.simulated,
        "role": role,
    }


class Bench(Box):
    """A connected box with the judge at hand; what `open_box` gives."""

    def test(
        self, part: Part | str, role: Place | str | None = None, store: Store | None = None, **options: Any
    ) -> Outcome:
        """Test the part under the closed lid and return its outcome; waits for the box to be at rest first.

        `part` may be a marking, `role` a word such as "coupling@310V/470k". Further options are those of `test_part`.
        """
        self.settle()
        what = part if isinstance(part, Part) else Part.parse(part)
        place = Place.parse(role) if isinstance(role, str) else role
        word = role if isinstance(role, str) else None
        return test_part(self, what, place, store=store, **{"role": word, **options})


def open_box(url: str, *, wire_log: str | Path | None = None) -> Bench:
    """Connect to a box by a serial port, any pyserial URL, or emu://NAME. Raises NoBoxError, WrongBoxError or UsageError."""
    log = None if wire_log is None else WireLog(Path(wire_log))
    return Bench(url, wire_log=log)
