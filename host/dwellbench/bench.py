"""A box, the judge and the store together: one part from its marking to its record.

The record is opened before the box is asked to run, and rows go into it as they arrive, so that whatever happens afterwards
(Ctrl-C, a lost link, a killed program) what was measured is kept. Only a run that came to its end is judged from its readings.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass, field
from datetime import UTC, datetime
from functools import cached_property
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
from dwellbench.recording import Recording
from dwellbench.records import RunWriter, Store
from dwellbench.run import Run, unproven
from dwellbench.wire.core import Notice
from dwellbench.wire.held import held
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
    role = role or (place.role if place else None)
    job = _Job(part, place, plan, grade, role, thresholds, esr_ohm, box.calibration())
    recording = Recording(None)
    ender = _Ender(box, job) if may_end_early else None
    run: Run | None = None
    try:
        with held():
            recording = Recording(None if store is None else _begin(store, box, job, label, note))
        run = box.start(plan)
        if watcher is not None:
            watcher.began(plan, run)
        _follow(run, recording, watcher, ender)
    except BaseException as error:
        reason = _made_safe(run, error)
        recording.interrupted(run, reason)
        if run is not None:
            run.carried_by(reason)
        if reason is not error:
            raise reason from None
        raise
    outcome = _judged(run, job).stamped(**_stamps(box, run, job, recording.name))
    recording.ended(run, outcome.as_json())
    return outcome


@dataclass(frozen=True)
class _Job:
    """What is to be found out, and with what."""

    part: Part
    place: Place | None
    plan: Plan
    grade: str
    role: str | None
    thresholds: Thresholds | None
    esr_ohm: float | None
    document: dict[str, Any] | None  # the box's calibration as it keeps it
    began_utc: str = field(default_factory=lambda: datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ"))

    @cached_property
    def calibration(self) -> Calibration | None:
        return None if self.document is None else Calibration.from_json(self.document)


def _begin(store: Store, box: Box, job: _Job, label: str | None, note: str | None) -> RunWriter:
    identity = box.identity
    return store.begin_run(
        run_key=job.plan.run_key,
        part=job.part.as_json(),
        role=job.role,
        grade=job.grade,
        plan=asdict(job.plan),
        box={name: getattr(identity, name) for name in ("box", "model", "firmware", "build")},
        calibration=job.document,
        simulated=identity.simulated,
        label=label,
        note=note,
        started_utc=job.began_utc,
    )


class _Ender:
    """Asks the judge once a second of dwell whether the run may end, and asks the box to finish when it may."""

    def __init__(self, box: Box, job: _Job) -> None:
        self._box = box
        self._job = job
        self._asked_ms = 0
        self._over = False

    def look(self, run: Run) -> None:
        """Look at what has come so far."""
        if self._over or run.state != "dwell" or not run.rows or run.rows[-1][1] - self._asked_ms < 1000:
            return
        self._asked_ms = run.rows[-1][1]
        job = self._job
        trace = calibrate(run.raw(), job.calibration)
        if may_end(trace, job.part, job.place, grade=job.grade, thresholds=job.thresholds) is not None:
            self._over = True
            self._box.finish()


def _follow(run: Run, recording: Recording, watcher: Watcher | None, ender: _Ender | None) -> None:
    """Everything that comes goes into the record first, then to whoever watches."""
    for notice in run:
        recording.take(notice)
        if watcher is not None:
            watcher.happened(notice, run)
        if ender is not None:
            ender.look(run)


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
    return run.stopped() if isinstance(error, KeyboardInterrupt) else error


def _judged(run: Run, job: _Job) -> Outcome:
    return judge(
        calibrate(run.raw(), job.calibration),
        job.part,
        job.place,
        grade=job.grade,
        end=run.end,
        fault=run.fault,
        thresholds=job.thresholds,
        asked_V=job.plan.volts_V,
        asked_s=job.plan.dwell_s,
        esr_ohm=job.esr_ohm,
    )


def _stamps(box: Box, run: Run, job: _Job, record: str | None) -> dict[str, Any]:
    return {
        "record": record,
        "run": run.plan.run_key,
        "time_utc": job.began_utc,
        "box": box.identity.box,
        "firmware": box.identity.firmware,
        "calibration": None if job.document is None else str(job.document.get("id")),
        "simulated": box.identity.simulated,
        "role": job.role,
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
