"""One run's stages: which belongs to which state, in what order, and how their answers become events.

The states are the sequence's; a state with several stages (charge has five) walks through them here. What a stage answers is
turned into an event for the table, which alone decides where to go.
"""

from .codes import (
    CHARGE,
    DISCHARGE,
    DWELL,
    END_COMPLETE,
    MEASURE,
    ST_CHARGE,
    ST_DISCHARGE,
    ST_DWELL,
    ST_EMPTY,
    ST_LOOK,
    ST_MEASURE,
    ST_PROVE,
    ST_ZERO,
)
from .sequence import EV_ACCOUNTED, EV_CHARGED, EV_EMPTIED, EV_END, EV_HELD
from .stage import GO, NEXT, end_of, fault_of
from .stages.bleed import Bleed
from .stages.charge import Charge
from .stages.empty import Empty
from .stages.hold import Hold
from .stages.look import Look
from .stages.nudge import Nudge
from .stages.probe import Probe, ProbeVerdict
from .stages.prove import Prove
from .stages.zero import Zero

NOTHING = -1


class Runner:
    """Steps the stage of the present state; says which event follows."""

    def __init__(self, bench):
        """Make every stage once."""
        self.bench = bench
        self.end = END_COMPLETE
        self.fault = 0
        self.bleed = Bleed()
        probe = Probe()
        # state: the event when its stages are through, then (stage code, stage) in order
        self._plan = {
            CHARGE: (
                EV_CHARGED,
                (ST_ZERO, Zero()),
                (ST_PROVE, Prove()),
                (ST_LOOK, Look()),
                (ST_EMPTY, Empty()),
                (ST_CHARGE, Charge()),
            ),
            DWELL: (EV_HELD, (ST_DWELL, Hold())),
            MEASURE: (
                EV_ACCOUNTED,
                (ST_MEASURE, probe),
                (ST_MEASURE, Nudge()),
                (ST_MEASURE, ProbeVerdict(probe)),
            ),
            DISCHARGE: (EV_EMPTIED, (ST_DISCHARGE, self.bleed)),
        }
        self._row = None
        self._at = 0
        self._stage = None

    def enter(self, state, now):
        """Begin the stages of a state that has some."""
        self._row = self._plan[state]
        self._at = 0
        self._next(now)

    def leave(self):
        """Have no stage: what follows is the proof or rest."""
        self._row = None
        self._stage = None

    def _next(self, now):
        self._at += 1
        code, self._stage = self._row[self._at]
        self.begin(code, self._stage, now)

    def begin(self, code, stage, now):
        """Begin one stage: the window ends where it begins, so that no row mixes two stages."""
        bench = self.bench
        bench.cut(now)
        bench.stage = code
        bench.stage_ms = now
        bench.front.counting = code in (ST_LOOK, ST_CHARGE, ST_MEASURE)
        if stage is not None:
            stage.begin(bench, now)

    def step(self, now):
        """Step the stage; return an event for the table, or NOTHING. `fault` is set when a stage found one."""
        if self._stage is None:
            return NOTHING
        answer = self._stage.step(self.bench, now)
        if answer == GO:
            return NOTHING
        if answer == NEXT:
            if self._at + 1 < len(self._row):
                self._next(now)
                return NOTHING
            return self._row[0]
        self.fault = fault_of(answer)
        if self.fault:
            return NOTHING
        self.end = end_of(answer)
        return EV_END
