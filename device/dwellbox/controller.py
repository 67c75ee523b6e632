"""The control loop: one cooperative step every 5 ms, from readings to outputs. It decides safety; the host never does.

The order of a step, and why
1. take the codes of the conversions started one period ago, read the inputs;
2. the interlock table, before anything else is thought about;
3. the course: the stage of the run or the proof of discharge, and the moves;
4. write every output, so that a change of an input is acted on in the period it is read;
5. start the next conversions, serve the link. The link comes last: it may be late, the outputs may not.

Whatever raises inside a step is a fault like another: each output is driven to rest on its own, then the reason is latched.

Budget on the reference board: 2 ms for a steady step, 4 ms at worst, of a period of 5 ms. The heap is not touched in the
steady state (dwell, rest). What allocates: the start of a run, answers to the host, the look.
"""

import json

from .codes import FAULT_BOARD, LOCKOUT, OUT_RELEASE
from .compat import const, ticks_diff
from .course import Course
from .front import Front
from .interlock import ASTRAY, HV, PART_LIVE, SILENT, STUCK, UNLOCKED, Conditions, Interlock
from .latch import Latch
from .proof import Proof
from .ratings import Ratings
from .requests import Requests
from .ring import Ring
from .shunts import Shunts
from .stage import Bench
from .supply import Supply
from .thermistor import code_at
from .wire import Wire

_FAREWELL = const(20)  # periods in which the link carries the last answer away: a reset empties its buffers
_EVENT_ROWS = const(80)  # room in the ring beside two minutes of samples
_AWAKE = HV | PART_LIVE


class Controller:
    """The whole firmware behind the board: `step()` once a period, then the board waits."""

    def __init__(self, board, reference, build="00000000"):
        """Build everything the loop uses. `reference` is the reference box's file as a dict; `build` eight hex digits."""
        now = board.now_ms()
        self.board = board
        self.reference = reference
        self.build = build
        self.boot = _count_boot(board)
        self.maintenance = False
        self._leaving = 0  # periods since the answer to it was put
        self.ratings = Ratings(reference, _settings(board))
        self.front = Front(board, self.ratings)
        self.supply = Supply(board, self.ratings)
        self.conditions = Conditions(self.ratings, code_at(self.ratings.part_temp_mc))
        self.interlock = Interlock()
        self.ring = Ring(self.ratings.ring_s * 1000 // self.ratings.window_ms + _EVENT_ROWS)
        self.bench = Bench(self.ratings, self.front, self.supply, Shunts(self.ratings), self.ring)
        proof = Proof(self.ratings)
        self.bench.proof = proof
        self.course = Course(self.bench, proof, Latch(board), self.interlock, self.conditions, now)
        self.wire = Wire(board, self.ring, Requests(self), self.boot)
        self._last_ms = now

    def step(self):
        """Do one period. Never raises, never blocks."""
        now = self.board.now_ms()
        try:
            self._step(now)
        except Exception as error:  # whatever it is, the outputs go to rest first
            self._shut_down(error)
        self.board.feed()
        if not self.bench.cut_now:  # a period that has ended a window has no room for the link too
            self.wire.step(now)
        if self.maintenance:
            self._leave()

    def _step(self, now):
        course = self.course
        late = ticks_diff(now, self._last_ms) - self.ratings.period_ms
        self._last_ms = now
        if course.paused:
            course.paused = False
            late = 0
        self.front.take(now)
        bits = self.conditions.step(self.board.inputs(), self.front, self.supply, now, late)
        self._prepare(bits, now)
        if self.bench.astray:
            bits |= ASTRAY
        silent = ticks_diff(now, self.wire.last_heard_ms) > self.ratings.silence_ms
        course.step(self.interlock.step(bits, course.state), now, silent)
        self._drive(now)
        self.front.start()

    def _prepare(self, bits, now):
        """Say this period's facts to the stages, and end the window when its time is over."""
        bench = self.bench
        bench.below = not bits & (PART_LIVE | HV | SILENT | STUCK)
        bench.locked = not bits & UNLOCKED
        bench.window = False
        bench.cut_now = False
        if self.front.edge:
            bench.cut(now)
            bench.window = self.front.whole
            if not self.supply.on:
                bench.astray = False
            elif bench.window:
                bench.witness(now)

    def _drive(self, now):
        """Write every output of this period. A supply wanted where no state allows it is not driven, whoever wanted it."""
        bits = self.bench.bits()
        if self.supply.on and not self.course.powered():
            self.supply.off(now)
        if self.course.may_release():
            bits |= OUT_RELEASE
        self.board.outputs(bits)
        self.supply.step(now)

    def energised(self):
        """Say whether the part may be live: supply enabled, a witness above safe, or discharge not proven."""
        return self.supply.on or not self.course.proof.proven or bool(self.conditions.bits & _AWAKE)

    def _shut_down(self, error):
        """Drive each output to rest on its own, so that one that raises does not keep the others."""
        for put in (self.board.outputs, self.board.supply_mv):
            try:
                put(0)
            except Exception as second:
                error = second
        self.bench.relay(False, False)
        try:
            self.ring.log(self.course.run_ms(), "raised " + repr(error)[:60])
            self.course.fault(FAULT_BOARD)
        except Exception:
            self.supply.off(self._last_ms)
            self.course.latch.take(FAULT_BOARD)
            self.course.state = LOCKOUT

    def settings_changed(self):
        """Take up settings just written. At rest only; allocates."""
        self.ratings = Ratings(self.reference, _settings(self.board))
        self.bench.ratings = self.ratings
        self.conditions.warm_code = code_at(self.ratings.part_temp_mc)
        self.course.paused = True

    def _leave(self):
        """Out into the plain interpreter, once the answer has gone, with every output at rest."""
        if not self._leaving and self.wire.pending():
            return
        self._leaving += 1
        if self._leaving < _FAREWELL:
            return
        self.board.outputs(0)
        self.board.supply_mv(0)
        self.board.restart_plain()


def _settings(board):
    """Return this box's own settings as a dict, None when it has none, or something that fails the check."""
    data = board.kept("settings")
    if data is None:
        return None
    try:
        return json.loads(bytes(data).decode())
    except (ValueError, UnicodeError):
        return []


def _count_boot(board):
    """Count this start in flash; nothing is energised yet."""
    data = board.kept("boot")
    count = 0
    if data:
        for digit in bytes(data):
            count = count * 10 + digit - 48
    count = (count + 1) % 1000000
    board.keep("boot", str(count).encode())
    return count
