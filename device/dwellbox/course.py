"""The course of a run and of everything between runs: the present state, how it moves, and what is latched.

The table in `sequence` says which moves there are. Here stands what a move brings about: the stages that begin, the proof that
is taken up, what is written to flash, what the host is told. The state itself is committed last.
"""

import gc

from .codes import (
    CHARGE,
    DISCHARGE,
    DWELL,
    END_COMPLETE,
    END_FAULT,
    END_LINK_LOST,
    FAULT_CHARGE_LEFT,
    FAULT_ILLEGAL_MOVE,
    FAULT_NONE,
    FAULT_NOT_DISCHARGED,
    FORM,
    LOCKOUT,
    MEASURE,
    RECOVERY,
    REST,
    ST_DISCHARGE,
    ST_IDLE,
    ST_RECOVERY,
    ST_VERIFY,
    VERIFY,
    WAKING,
)
from .compat import const, ticks_diff
from .interlock import SUPPLY_LIVE
from .proof import OPEN
from .runner import NOTHING, Runner
from .sequence import (
    ACCOUNTED,
    CALM,
    CLEAR,
    EV_END,
    EV_FAULT,
    EV_PROVEN,
    EV_RISEN,
    EV_RUN,
    EV_WATCHED,
    PROVEN,
    SHUT,
    WATCH,
    move,
    name_of,
)
from .stage import GO, fault_of

_PROOF_MOST_MS = const(120000)  # the worst-case bleed and its rebound, four times over
_RESIDUAL_MV = const(10000)  # above this at rest a part was fitted charged

_POWERED = (1 << CHARGE) | (1 << DWELL) | (1 << MEASURE) | (1 << FORM)


class Course:
    """Where the box is, and how it got there."""

    def __init__(self, bench, proof, latch, interlock, conditions, now):
        """Start in `waking`, or in `lockout` with the reason that an earlier life left."""
        self.bench = bench
        self.proof = proof
        self.latch = latch
        self.interlock = interlock
        self.conditions = conditions
        self.runner = Runner(bench)
        self.state = WAKING
        self.plan = None
        self.run = 0
        self.run_key = None
        self.now_ms = now
        self.paused = True  # a declared pause (flash, heap) has just been made: the next period is not late
        self._state_ms = now
        self._held = False
        self._watched = False
        self._accounting = False
        self._residual_mv = 0
        bench.base_ms = now
        proof.begin(now)
        bench.ring.state(0, WAKING, ST_IDLE, "started")
        if latch.reason != FAULT_NONE:
            self._enter(LOCKOUT, "latched before the start")

    # ---- one period

    def step(self, fault, now, silent):
        """Take this period's fault (0: none) and whether the host has been silent for too long; go on from there."""
        self.now_ms = now
        if fault:
            self.fault(fault)
            return
        state = self.state
        if _POWERED >> state & 1:
            if silent:
                self.end_run(END_LINK_LOST)
            else:
                self._stage(now)
        elif state == DISCHARGE:
            self._stage(now)
        elif state == REST:
            self._rest()
        elif state == RECOVERY:
            self._recover(now)
        else:
            self._prove(now)

    def _stage(self, now):
        runner = self.runner
        event = runner.step(now)
        if event != NOTHING:
            self.event(event, "")
        elif runner.fault:
            found = runner.fault
            runner.fault = 0
            self.fault(found)

    def _rest(self):
        """At rest the bleed stays on and the divider is watched: a part fitted charged is seen while it is bled."""
        mv = self.bench.front.part_mv
        if mv > self._residual_mv:
            self._residual_mv = mv

    def _recover(self, now):
        if not self.bench.below:
            self.event(EV_RISEN, "back above safe")
        elif ticks_diff(now, self._state_ms) >= self.plan.recovery_ms:
            self.event(EV_WATCHED, "")

    def _prove(self, now):
        """Waking, verify and lockout: the proof goes on, and what it finds becomes an event."""
        bench = self.bench
        proof = self.proof
        if self._accounting:
            self._account(now)
        was = proof.proven
        supply_low = not self.conditions.bits & SUPPLY_LIVE
        opened = proof.step(now, bench.below, supply_low) == OPEN
        bench.relay(opened, opened)
        if proof.proven and not was:
            self._proven()
        elif self.state == VERIFY and not bench.below:
            self.event(EV_RISEN, "back above safe")
        elif self.state != LOCKOUT and ticks_diff(now, self._state_ms) > _PROOF_MOST_MS:
            self.fault(FAULT_NOT_DISCHARGED)

    def _account(self, now):
        """In lockout after a run: the discharge is watched as in order, and charge that is missing is remembered."""
        answer = self.runner.bleed.step(self.bench, now)
        if answer == GO:
            return
        self._accounting = False
        found = fault_of(answer)
        if found:
            self._note(found)

    def _proven(self):
        """Discharge is proven: what had to wait for it may be written, and the sequence goes on."""
        if self.latch.reason != FAULT_NONE and self.latch.settle():
            self.paused = True
        if self.state != LOCKOUT:
            self.event(EV_PROVEN, "discharge proven")
            return
        self.bench.ring.state(self.run_ms(), LOCKOUT, ST_IDLE, "discharge proven")
        self._stop_recording()

    # ---- moves

    def facts(self):
        """Return the facts that guards may ask for."""
        facts = 0
        if self.proof.proven:
            facts |= PROVEN
        if self.latch.reason == FAULT_NONE:
            facts |= CLEAR
        if not self.latch.missing:
            facts |= ACCOUNTED
        if self.interlock.calm(self.conditions.bits):
            facts |= CALM
        if self.conditions.lid_shut:
            facts |= SHUT
        if self.plan is not None and self.plan.recovery_ms and not self._watched and self._held:
            facts |= WATCH
        return facts

    def event(self, event, why):
        """Move by the table, or fail closed."""
        after = move(self.state, event, self.facts())
        if after < 0:
            self.bench.ring.log(self.run_ms(), "no move for " + name_of(self.state, event))
            self.fault(FAULT_ILLEGAL_MOVE)
        else:
            self._enter(after, why)

    def fault(self, fault):
        """Latch a fault and go to lockout. One that stands in lockout is not new each period, and the proof goes on."""
        state = self.state
        if state == LOCKOUT:
            self.latch.keep_first(fault)
            self._prove(self.now_ms)
            return
        running = self.bench.recording is not None
        self._note(fault)
        self._enter(move(state, EV_FAULT, 0), "fault")
        if running:
            self._done(END_FAULT, fault)

    def _note(self, fault):
        """Tell and latch a fault."""
        self.bench.ring.fault(self.run_ms(), fault, self.state, self.bench.front.part_mv)
        self.latch.take(fault)
        if fault == FAULT_CHARGE_LEFT:
            self.latch.charge_missing()

    def _enter(self, state, why):
        """Commit a move: what the new state needs is set up first, the state itself comes last."""
        now = self.now_ms
        self._state_ms = now
        if state == LOCKOUT:
            self._enter_lockout(now)
        elif state == REST:
            self._enter_rest(now)
        elif state == VERIFY:
            self.runner.leave()
            self.runner.begin(ST_VERIFY, None, now)
            self.proof.begin(now)
        elif state == RECOVERY:
            self._watched = True
            self.runner.begin(ST_RECOVERY, None, now)
            self.bench.relay(True, True)
        else:
            self._enter_staged(state, now)
        self.state = state
        self.bench.ring.state(self.run_ms(), state, self.bench.stage, why)

    def _enter_staged(self, state, now):
        bench = self.bench
        self.conditions.ceiling_na = 0
        if state == DWELL:
            self._held = True
            self.conditions.ceiling_na = self.plan.ceiling_ua * 1000
        elif state == DISCHARGE:
            bench.bleed_ms = self.plan.bleed_ms if self._held else 0
        self.runner.enter(state, now)

    def _enter_lockout(self, now):
        """Supply off and bleed on at once; then the account of the charge, and the proof."""
        bench = self.bench
        before = self.state
        bench.supply.off(now)
        self.conditions.ceiling_na = 0
        self.runner.leave()
        bench.bleed_ms = 0
        if _POWERED >> before & 1:
            self._accounting = True
            self.runner.begin(ST_DISCHARGE, self.runner.bleed, now)
        elif before == DISCHARGE:
            self._accounting = True
        else:
            self.runner.begin(ST_VERIFY, None, now)
        bench.relay(False, False)
        self.proof.begin(now)

    def _enter_rest(self, now):
        bench = self.bench
        self.runner.leave()
        self.runner.begin(ST_IDLE, None, now)
        bench.relay(False, False)
        if self.latch.unmark():
            self.paused = True
        if bench.recording is not None:
            self._done(self.runner.end, FAULT_NONE)
        self._stop_recording()
        self._residual_mv = 0

    # ---- a run's begin and end

    def begin_run(self, plan):
        """Begin a run that has been accepted. Marks it in flash first, which pauses the loop; allocates."""
        self.latch.mark()
        self.paused = True
        self.plan = plan
        self.run += 1
        self.run_key = plan.key
        self._held = False
        self._watched = False
        self._accounting = False
        self.runner.end = END_COMPLETE
        self.conditions.most_mv = plan.most_mv()
        self.bench.cut(self.now_ms)  # what was read at rest belongs to no run
        self.bench.prepare(plan, self.now_ms, self._residual_mv)
        self.event(EV_RUN, "run " + plan.key)
        self.proof.forget()

    def end_run(self, end):
        """End a run early, in order."""
        self.runner.end = end
        self.event(EV_END, "")

    def acknowledged(self):
        """Forget the latched reason, in flash too."""
        self.latch.acknowledge()
        self.paused = True

    def _done(self, end, fault):
        bench = self.bench
        extra = [("look_pf", bench.capacitance_pf)]
        if bench.short_na:
            extra.append(("short_mv", bench.short_mv))
            extra.append(("short_na", bench.short_na))
        if bench.residual_mv > _RESIDUAL_MV:
            extra.append(("residual_mv", bench.residual_mv))
        bench.ring.done(self.run_ms(), self.run, self.run_key, end, fault, extra)

    def _stop_recording(self):
        """The run is over and the part safe: stop keeping rows, and collect the heap while nothing waits for it."""
        if self.bench.recording is not None:
            self.bench.cut(self.now_ms)
            self.bench.recording = None
        gc.collect()
        self.paused = True

    # ---- what others ask

    def powered(self):
        """Say whether the state is one in which the supply may be on."""
        return bool(_POWERED >> self.state & 1)

    def may_release(self):
        """Say whether the lid may be unlocked: discharge proven, nothing missing, nothing under way."""
        state = self.state
        return self.proof.proven and not self.latch.missing and (state == REST or state == LOCKOUT)

    def run_ms(self):
        """Return the milliseconds since the run began (before any: since boot)."""
        return ticks_diff(self.now_ms, self.bench.base_ms)

    def left_ms(self):
        """Return how long the present state still takes, as far as that is known; 0 otherwise."""
        bench = self.bench
        if self.state == DWELL:
            return max(0, self.plan.dwell_ms - bench.gone(self.now_ms))
        if self.state == DISCHARGE:
            return max(0, bench.bleed_ms - bench.gone(self.now_ms))
        return 0
