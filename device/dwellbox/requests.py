"""What a host may ask, and what the box answers or refuses. The box decides; a refusal carries its reason.

Called by the wire with parameters already checked for type and range. Everything here may allocate: it runs between periods'
work, at most one request a period.
"""

from .answers import Pages, hello, status
from .codes import (
    DWELL,
    E_BUSY,
    E_HARDWARE,
    E_LID,
    E_LID_MUST_BE_OPEN,
    E_LOCKED_OUT,
    E_NOT_NOW,
    E_NOT_SAFE,
    E_SETTINGS,
    E_STOP_PRESSED,
    END_ABORTED,
    END_FINISHED,
    LOCKOUT,
    RECOVERY,
    REST,
    STATES,
    WAKING,
)
from .interlock import STOP
from .plan import Plan, refusal
from .sequence import ACCOUNTED, CALM, EV_ACKNOWLEDGE, EV_HELD, EV_WATCHED, PROVEN
from .wire import Refusal


class Requests:
    """The wire's handler: `call(method, params, crc_ok)` gives result pairs or raises a refusal."""

    def __init__(self, box):
        """Take the controller."""
        self._box = box
        self._pages = Pages(box)

    def call(self, method, params, crc_ok):
        """Answer one request."""
        return self._METHODS[method](self, self._box, params)

    def _hello(self, box, params):
        return hello(box)

    def _status(self, box, params):
        return status(box)

    def _keepalive(self, box, params):
        return [("t", box.course.run_ms())]

    def _run(self, box, params):
        plan = Plan(params)
        if plan.key != box.course.run_key:
            _refuse_run(box, plan)
            box.course.begin_run(plan)
        return [
            ("run_key", box.course.run_key),
            ("run", box.course.run),
            ("estimate_ms", box.course.plan.estimate_ms(box.ratings)),
        ]

    def _finish(self, box, params):
        if box.course.state != DWELL:
            raise Refusal(E_NOT_NOW, STATES[box.course.state])
        box.course.runner.end = END_FINISHED
        box.course.event(EV_HELD, "finish")
        return _state(box)

    def _abort(self, box, params):
        if box.course.powered():
            box.course.end_run(END_ABORTED)
        elif box.course.state == RECOVERY:
            box.course.event(EV_WATCHED, "abort")
        return _state(box)

    def _acknowledge(self, box, params):
        if box.course.state != LOCKOUT:
            return _state(box)
        if params.get("shorted") and box.course.proof.proven:
            box.course.latch.missing = False
        facts = box.course.facts()
        if not facts & PROVEN:
            raise Refusal(E_NOT_SAFE)
        if not facts & ACCOUNTED:
            raise Refusal(E_NOT_SAFE, "charge_missing")
        if not facts & CALM:
            raise Refusal(E_HARDWARE)
        box.course.event(EV_ACKNOWLEDGE, "acknowledged")
        box.course.acknowledged()
        return _state(box)

    def _settings(self, box, params):
        return self._pages.answer(params)

    def _maintenance(self, box, params):
        if box.course.state != REST or not box.course.proof.proven:
            raise Refusal(E_NOT_NOW, STATES[box.course.state])
        if box.conditions.lid_shut:
            raise Refusal(E_LID_MUST_BE_OPEN)
        box.maintenance = True
        return [("restart", True)]

    _METHODS = {
        "hello": _hello,
        "status": _status,
        "keepalive": _keepalive,
        "run": _run,
        "finish": _finish,
        "abort": _abort,
        "acknowledge": _acknowledge,
        "settings": _settings,
        "maintenance": _maintenance,
    }


def _state(box):
    return [("state", STATES[box.course.state])]


def _refuse_run(box, plan):
    """Refuse with the first reason that stands, in the order a person would mend them."""
    if box.course.state == LOCKOUT:
        raise Refusal(E_LOCKED_OUT)
    if box.course.state == WAKING:
        raise Refusal(E_NOT_NOW, STATES[box.course.state])
    if box.course.state != REST:
        raise Refusal(E_BUSY)
    if box.ratings.problem:
        raise Refusal(E_SETTINGS, box.ratings.problem)
    refused = refusal(plan, box.ratings)
    if refused is not None:
        raise Refusal(refused[0], refused[1])
    if box.conditions.bits & STOP:
        raise Refusal(E_STOP_PRESSED)
    if not box.conditions.lid_shut:
        raise Refusal(E_LID)
    if not box.course.proof.proven:
        raise Refusal(E_NOT_SAFE)
    if not box.interlock.calm(box.conditions.bits):
        raise Refusal(E_HARDWARE)
