"""The sequence of a run: one literal table of legal moves, and nothing else that moves.

Rules
* Every state has a row, even one from which nothing leads yet. A row maps an event to (guard, next state); the guard is a
  column of the table, a bit mask of facts that must all hold.
* An event that the row lacks, or whose guard does not hold, fails closed: the move is to `lockout` with the reason
  "illegal_move", naming state and event.
* `lockout` is left only by an acknowledgement with discharge proven, no joint condition standing, and the reason recorded.
* What each state drives (relays, supply) follows from state and stage alone; a move has no other effect, and the caller
  commits the state last.

Theory: states stand for what may be on the part. In `charge`, `dwell`, `measure` and `form` the supply may be on. In
`discharge`, `verify`, `recovery`, `waking` and `lockout` it is off. Only in `rest` is discharge proven; `verify` is the proof.

Known limits: the table says nothing of time. Every state that waits has a bound of its own, kept by its stage, and a bound
that runs out arrives here as a fault.
"""

from .codes import (
    CHARGE,
    DISCHARGE,
    DWELL,
    FORM,
    LOCKOUT,
    MEASURE,
    RECOVERY,
    REST,
    STATES,
    VERIFY,
    WAKING,
)
from .compat import const

# Events
EV_RUN = const(0)  # a run was accepted
EV_CHARGED = const(1)  # the voltage is in: the dwell clock starts
EV_HELD = const(2)  # the time of electrification is over
EV_ACCOUNTED = const(3)  # the charge on the part has been seen by the shunt
EV_END = const(4)  # the run ends early, in order
EV_EMPTIED = const(5)  # both witnesses below safe, bleed time over
EV_PROVEN = const(6)  # discharge proven, the rebound included
EV_RISEN = const(7)  # back above safe while it was being proven or watched
EV_WATCHED = const(8)  # the rebound has been watched for as long as asked
EV_ACKNOWLEDGE = const(9)  # the operator has taken note of the reason
EV_FAULT = const(10)  # a latched reason
EVENTS = (
    "run",
    "charged",
    "held",
    "accounted",
    "end",
    "emptied",
    "proven",
    "risen",
    "watched",
    "acknowledge",
    "fault",
)

# Facts: the guards' vocabulary
PROVEN = const(1)  # discharge is proven
CLEAR = const(2)  # no latched reason
CALM = const(4)  # no joint condition of the interlock table stands
SHUT = const(8)  # the lid is closed by both switches
ACCOUNTED = const(16)  # no charge is missing
WATCH = const(32)  # the plan asks for the rebound to be watched, and it has not been yet

_LOCK = ((0, LOCKOUT),)

# state: {event: ((guard, next state), ...)}; of several the first whose guard holds is taken.
MOVES = {
    WAKING: {EV_PROVEN: ((PROVEN | CLEAR, REST),), EV_FAULT: _LOCK},
    REST: {EV_RUN: ((PROVEN | CLEAR | CALM | SHUT, CHARGE),), EV_FAULT: _LOCK},
    CHARGE: {EV_CHARGED: ((0, DWELL),), EV_END: ((0, DISCHARGE),), EV_FAULT: _LOCK},
    DWELL: {EV_HELD: ((0, MEASURE),), EV_END: ((0, DISCHARGE),), EV_FAULT: _LOCK},
    MEASURE: {EV_ACCOUNTED: ((0, DISCHARGE),), EV_END: ((0, DISCHARGE),), EV_FAULT: _LOCK},
    DISCHARGE: {EV_EMPTIED: ((0, VERIFY),), EV_FAULT: _LOCK},
    VERIFY: {
        EV_PROVEN: ((PROVEN | WATCH, RECOVERY), (PROVEN, REST)),
        EV_RISEN: ((0, DISCHARGE),),
        EV_FAULT: _LOCK,
    },
    RECOVERY: {EV_WATCHED: ((0, DISCHARGE),), EV_RISEN: ((0, DISCHARGE),), EV_FAULT: _LOCK},
    FORM: {EV_FAULT: _LOCK},
    LOCKOUT: {EV_ACKNOWLEDGE: ((PROVEN | CALM | ACCOUNTED, REST),), EV_FAULT: _LOCK},
}


def move(state, event, facts):
    """Return the next state, or -1 when the table has no such move or no guard of it holds."""
    for guard, after in MOVES[state].get(event, ()):
        if guard & facts == guard:
            return after
    return -1


def name_of(state, event):
    """Say a state and an event for people, as in "dwell/proven"."""
    return STATES[state] + "/" + EVENTS[event]
