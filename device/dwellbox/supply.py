"""The supply: its setting, its ramp, its pumped enable, and whether it does what it was told.

The enable is not a level: the loop toggles it once a period while the supply may be on, and hardware drops it within 50 ms of
the last toggle, so a controller that hangs with the output high or low loses the supply all the same.

The supply is read in one slot of every window (100 ms), so a departure from the setting is seen within 100 ms and one period.
The part's own voltage, which is what can hurt, is read in nearly every period and has a guard of its own.
"""

from .compat import const, ticks_diff

OK = const(0)
OVER = const(1)
LOST = const(2)
STILL_ON = const(3)

_SETTLE_MS = const(200)  # full slew (65 ms) and one reading's age (100 ms), with margin
_OFF_MS = const(1500)  # 10 nF over 10 Mohm from 650 V to 30 V is 0.31 s; three of those and a reading
_SLACK_MV = const(4000)  # divider offset, ripple and quantisation, worst case
_RAMP_SLACK_MV = const(25000)  # two windows of the fastest ramp (100 V/s) between setting and reading
_LOST_AFTER = const(2)  # readings in a row
_OFF_MV = const(30000)


class Supply:
    """Setting in millivolts. `on` says whether the controller wants it; only `pump` makes it so."""

    def __init__(self, board, ratings):
        """Take the board and the box's numbers. Allocates nothing afterwards."""
        self._board = board
        self._slack_pm = ratings.tolerance_pm + 10
        self.on = False
        self.mv = 0
        self.ramping = False
        self._goal_mv = 0
        self._base_mv = 0
        self._base_ms = 0
        self._per_s = 0
        self._changed_ms = 0
        self._bad = 0
        self._long_off = False

    def set(self, mv, now):
        """Step to `mv` and switch on."""
        self.ramping = False
        self.mv = mv
        self.on = True
        self._changed_ms = now

    def ramp(self, goal_mv, per_s, now):
        """Ramp from the present setting to `goal_mv`, up or down, at `per_s` millivolts a second, and switch on."""
        self.on = True
        self.ramping = True
        self._goal_mv = goal_mv
        self._base_mv = self.mv
        self._base_ms = now
        self._per_s = per_s
        self._changed_ms = now

    def off(self, now):
        """Switch off: no more pumping, setting to zero."""
        if self.on or self.mv:
            self._changed_ms = now
            self._long_off = False
        self.on = False
        self.ramping = False
        self.mv = 0

    def step(self, now):
        """Move the ramp on and write the setting; pump if the supply is wanted."""
        if self.ramping:
            gone = ticks_diff(now, self._base_ms)
            moved = self._per_s * gone // 1000 if self._per_s < 2000 else self._per_s // 10 * gone // 100
            if moved >= abs(self._goal_mv - self._base_mv):
                mv = self._goal_mv
                self.ramping = False
            elif self._goal_mv > self._base_mv:
                mv = self._base_mv + moved
            else:
                mv = self._base_mv - moved
            self.mv = mv
            self._changed_ms = now
        self._board.supply_mv(self.mv)
        if self.on:
            self._board.pump()

    def quiet(self, now):
        """Say whether the setting has stood long enough for a reading to be compared with it."""
        return ticks_diff(now, self._changed_ms) >= _SETTLE_MS

    def judge(self, reading_mv, now):
        """Compare a fresh reading with the setting: OK, OVER, LOST or STILL_ON."""
        if not self.on:
            if not self._long_off:  # kept as a fact, since the ticks wrap
                self._long_off = ticks_diff(now, self._changed_ms) >= _OFF_MS
            return STILL_ON if self._long_off and reading_mv > _OFF_MV else OK
        slack = self.mv // 1000 * self._slack_pm + _SLACK_MV
        if self.ramping:
            slack += _RAMP_SLACK_MV
        elif not self.quiet(now):
            return OK
        off = reading_mv - self.mv
        if -slack <= off <= slack:
            self._bad = 0
            return OK
        if off > 0:
            return OVER
        self._bad += 1
        return LOST if self._bad >= _LOST_AFTER else OK
