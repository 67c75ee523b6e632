"""The interlock: joint conditions, in one table, applied to every period in every state.

How it reads
* `Conditions` turns this period's inputs, readings and clock into one bit mask. It judges nothing.
* `TABLE` has a row for each dangerous combination: the fault, the conditions that must all be present, those that must be
  absent, the states in which it counts, and how many periods running it must stand. Every row is looked at, so the order in
  which inputs arrived does not matter; of several faults the first in the table is the reason, the others are logged.
* Whatever the table finds goes to the sequence as a fault; nothing here switches anything.

Why some rows wait: a relay bounces for 2 ms, lid switches for 10 ms at rest; the detector is faster than the divider, whose
reading is one to three periods old while a small part charges or bleeds. Rows that guard a person (lid, stop) do not wait:
one lid switch that says open is an open lid. That the switches disagree is a fault of its own only where it stands for ten
seconds at rest, for an opening lid moves them one after the other.

A divider that has drifted, a charge relay or resistor that has opened, show as supply, current and part voltage that no longer
fit together over the charge path; that is judged over a whole settled window and must stand into a second one.

Known limits: the supply is read once in 100 ms, the thermistor once in 200 ms, so their rows act within that time; the
hardware's own current limit and the part's own voltage guard hold until then.
"""

from .codes import (
    CHARGE,
    DISCHARGE,
    DWELL,
    FAULT_CLOCK,
    FAULT_CONVERTER_SILENT,
    FAULT_CONVERTER_STUCK,
    FAULT_DETECTOR,
    FAULT_DIVIDER,
    FAULT_LID_OPEN,
    FAULT_LID_SWITCHES,
    FAULT_LOCK,
    FAULT_OVER_CURRENT,
    FAULT_OVER_TEMPERATURE,
    FAULT_OVER_VOLTAGE,
    FAULT_REBOUND,
    FAULT_STOP,
    FAULT_SUPPLY,
    FAULT_SUPPLY_ON,
    FAULT_SUPPLY_OVER,
    FAULT_THERMISTOR,
    FORM,
    IN_HV,
    IN_LID_A,
    IN_LID_B,
    IN_LOCKED,
    IN_STOP,
    LOCKOUT,
    MEASURE,
    RECOVERY,
    REST,
    VERIFY,
    WAKING,
)
from .compat import const
from .supply import LOST, OVER, STILL_ON

# Conditions, one bit each
LID_OPEN = const(1)  # both switches say open
LID_UNSURE = const(2)  # the switches disagree
STOP = const(4)
HV = const(8)  # detector
UNLOCKED = const(16)
PART_LIVE = const(32)  # divider above safe
PART_HIGH = const(64)  # divider above the disagreement threshold
PART_LOW = const(128)  # divider below half of safe: what the detector could never take for live
OVER_VOLTAGE = const(256)
OVER_CURRENT = const(512)
SUPPLY_OVER = const(1024)
SUPPLY_LOST = const(2048)
SUPPLY_ON = const(4096)
SUPPLY_LIVE = const(8192)
WARM = const(16384)
THERMISTOR = const(32768)
SILENT = const(65536)
STUCK = const(131072)
LATE = const(262144)
ASTRAY = const(524288)  # supply, current and part voltage do not fit together over the charge path

_POWERED = (1 << CHARGE) | (1 << DWELL) | (1 << MEASURE) | (1 << FORM)
_EMPTYING = (1 << DISCHARGE) | (1 << VERIFY) | (1 << RECOVERY)
_RUN = _POWERED | _EMPTYING
_WAKE = 1 << WAKING
_REST = 1 << REST
_LOCK = 1 << LOCKOUT
_ALL = _RUN | _WAKE | _REST | _LOCK

# (fault, conditions present, conditions absent, states, periods running)
TABLE = (
    (FAULT_LID_OPEN, LID_OPEN, 0, _RUN, 1),
    (FAULT_LID_OPEN, LID_UNSURE, 0, _RUN, 1),
    (FAULT_LID_SWITCHES, LID_UNSURE, 0, _REST, 2000),
    (FAULT_STOP, STOP, 0, _RUN, 1),
    (FAULT_OVER_VOLTAGE, OVER_VOLTAGE, 0, _POWERED, 2),
    (FAULT_SUPPLY_OVER, SUPPLY_OVER, 0, _POWERED, 1),
    (FAULT_DETECTOR, PART_HIGH, HV, _ALL, 6),
    (FAULT_DETECTOR, PART_LOW | HV, 0, _ALL, 6),
    (FAULT_CONVERTER_SILENT, SILENT, 0, _ALL, 2),
    (FAULT_CONVERTER_STUCK, STUCK, 0, _ALL, 1),
    (FAULT_SUPPLY_ON, SUPPLY_ON, 0, _WAKE | _REST | _EMPTYING, 1),
    (FAULT_SUPPLY, SUPPLY_LOST, 0, _POWERED, 1),
    (FAULT_REBOUND, PART_LIVE, 0, _REST, 6),
    (FAULT_REBOUND, HV, 0, _REST, 6),
    (FAULT_DIVIDER, ASTRAY, 0, _POWERED, 25),
    (FAULT_LOCK, UNLOCKED, 0, _RUN, 100),
    (FAULT_OVER_CURRENT, OVER_CURRENT, 0, (1 << DWELL) | (1 << FORM), 2),
    (FAULT_OVER_TEMPERATURE, WARM, 0, _POWERED, 2),
    (FAULT_THERMISTOR, THERMISTOR, 0, _POWERED, 2),
    (FAULT_CLOCK, LATE, 0, _RUN, 1),
)

# Later than this, and the supply's enable, which hardware drops after 50 ms, cannot be vouched for.
_LATE_MS = const(40)
# Less than nothing has gone by: the count went back, and every time that is waited for with it.
_BACK_MS = const(-5)
_SILENT_AFTER = const(2)
_OPEN_CODE = const(31500)  # 10 kohm pull-up at 1.000 V: above this the thermistor is open
_SHORT_CODE = const(300)


class Conditions:
    """Facts of this period as one bit mask. Thresholds are set once, when a run starts."""

    def __init__(self, ratings, warm_code):
        """Take the box's numbers and the thermistor code at which a part is too warm. Allocates nothing afterwards."""
        self._safe_mv = ratings.safe_mv
        self._low_mv = ratings.safe_mv // 2
        self._high_mv = ratings.disagree_mv
        self.warm_code = warm_code
        self.most_mv = ratings.safe_mv
        self.ceiling_na = 0
        self.lid_shut = False
        self.bits = 0
        self._held = 0

    def step(self, inputs, front, supply, now, late_ms):
        """Return this period's conditions."""
        bits = 0
        a = inputs & IN_LID_A
        b = inputs & IN_LID_B
        self.lid_shut = bool(a) and not b
        if not self.lid_shut:
            bits = LID_OPEN if b and not a else LID_UNSURE
        if inputs & IN_STOP:
            bits |= STOP
        if inputs & IN_HV:
            bits |= HV
        if not inputs & IN_LOCKED:
            bits |= UNLOCKED
        mv = front.part_mv
        if mv >= self._safe_mv:
            bits |= PART_LIVE
            if mv >= self._high_mv:
                bits |= PART_HIGH
            if mv > self.most_mv:
                bits |= OVER_VOLTAGE
        elif mv < self._low_mv:
            bits |= PART_LOW
        if front.part_clipped:
            bits |= OVER_VOLTAGE
        if front.silent or front.stuck:
            bits |= self._converters(front)
        if self.ceiling_na and front.shunt_fresh and front.na(front.shunt_code) > self.ceiling_na:
            bits |= OVER_CURRENT
        if late_ms > _LATE_MS or late_ms < _BACK_MS:
            bits |= LATE
        return self._slow(bits, front, supply, now)

    def _converters(self, front):
        bits = 0
        if front.silent >= _SILENT_AFTER:
            bits = SILENT
        if front.stuck:
            bits |= STUCK
        return bits

    def _slow(self, bits, front, supply, now):
        """Add what changes once a window; between its readings the last verdict stands."""
        if front.supply_fresh:
            verdict = supply.judge(front.supply_mv, now)
            slow = 0
            if verdict == OVER:
                slow = SUPPLY_OVER
            elif verdict == LOST:
                slow = SUPPLY_LOST
            elif verdict == STILL_ON:
                slow = SUPPLY_ON
            if front.supply_mv >= self._safe_mv:
                slow |= SUPPLY_LIVE
            code = front.temp_code
            if code:
                if code > _OPEN_CODE or code < _SHORT_CODE:
                    slow |= THERMISTOR
                elif code < self.warm_code:
                    slow |= WARM
            self._held = slow
        self.bits = bits | self._held
        return self.bits


class Interlock:
    """Applies the table. Keeps a count for each row that must stand for several periods."""

    def __init__(self, table=TABLE):
        """Take the table. Allocates nothing afterwards."""
        self._table = table
        self._counts = [0] * len(table)
        self._bits = -1
        self._state = -1
        self._pending = False
        self.also = 0  # how many further rows stood beside the one returned

    def step(self, bits, state):
        """Return the fault of the first row that stands, or 0."""
        if bits == self._bits and state == self._state and not self._pending:
            return 0
        self._bits = bits
        self._state = state
        self._pending = False
        found = 0
        self.also = 0
        counts = self._counts
        mask = 1 << state
        k = 0
        for row in self._table:
            if row[3] & mask and bits & row[1] == row[1] and not bits & row[2]:
                self._pending = True
                counts[k] += 1
                if counts[k] >= row[4]:
                    if found:
                        self.also += 1
                    else:
                        found = row[0]
            else:
                counts[k] = 0
            k += 1
        return found

    def calm(self, bits):
        """Say whether no row would stand in a run: the guard of a start and of a way out of lockout.

        An open lid and a drawn bolt do not count: at rest both are as they should be, and a start has its own guard for the
        lid and waits for the bolt.
        """
        bits &= ~(LID_OPEN | UNLOCKED)
        for row in self._table:
            if bits & row[1] == row[1] and not bits & row[2]:
                return False
        return True
