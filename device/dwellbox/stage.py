"""What all stages of a run share: how a stage answers, and the bench it works with.

A stage is an object with `begin(bench, now)` and `step(bench, now)`. `step` answers GO while it goes on, NEXT when it is done,
or a number that carries an end or a fault. Stages read the front end and set relays, shunt and supply through the bench; they
never move the state, which the controller does by the table.
"""

from .board import FINE, WIDE
from .codes import OUT_BLEED_OPEN, OUT_CHARGE, OUT_LOW_OPEN, OUT_MID_SHUNT
from .compat import const, ticks_diff
from .shunts import LEVELS, LOW_FINE, LOW_WIDE

_ON_CHARGE = OUT_BLEED_OPEN | OUT_CHARGE
_PATH_PM = const(35)  # both dividers, charge resistors and shunt, worst case, in thousandths
_PATH_MV = const(4000)

GO = const(0)
NEXT = const(1)

# A reversed electrolytic stalls at a volt or two, a short at millivolts.
POLAR_STALL_MV = const(400)


def ends(end):
    """Answer that the run ends in order, for this reason."""
    return 1000 + end


def faults(fault):
    """Answer that a fault ends the run."""
    return 2000 + fault


def end_of(answer):
    """Return the end that an answer carries, or -1."""
    return answer - 1000 if 1000 <= answer < 2000 else -1


def fault_of(answer):
    """Return the fault that an answer carries, or 0."""
    return answer - 2000 if answer >= 2000 else 0


class Bench:
    """The part's surroundings during a run: relays, shunt, supply, readings, and what is known of the part."""

    def __init__(self, ratings, front, supply, shunts, ring):
        """Take the box's pieces. Allocates nothing afterwards."""
        self.ratings = ratings
        self.front = front
        self.supply = supply
        self.shunts = shunts
        self.ring = ring
        self.plan = None
        self.relays = 0
        self.level = LOW_WIDE
        self.capacitance_nf = 0
        self.capacitance_pf = 0
        self.base_ms = 0  # when the run began
        self.stage = 0
        self.stage_ms = 0  # when this stage began
        self.flags = 0
        self.short_mv = 0
        self.short_na = 0
        self.window = False  # a whole window has just been kept
        self.cut_now = False  # a window, whole or not, has ended in this period
        self.locked = False  # the bolt is in
        self.below = False  # both witnesses below safe
        self.astray = False  # over the last window supply, current and part voltage did not fit together
        self.proof = None
        self.recording = None  # the ring, while a run is under way
        self.bleed_ms = 0
        self.residual_mv = 0  # the most seen at rest before the run: a part that came charged

    def prepare(self, plan, now, residual_mv):
        """Begin a run: forget the last part."""
        self.plan = plan
        self.base_ms = now
        self.capacitance_nf = 0
        self.capacitance_pf = 0
        self.short_mv = 0
        self.short_na = 0
        self.flags = 0
        self.residual_mv = residual_mv
        self.recording = self.ring

    def relay(self, bleed_open, charge):
        """Set bleed and charge relays; the shunt's own coils follow from the level."""
        bits = 0
        if bleed_open:
            bits = OUT_BLEED_OPEN
        if charge:
            bits |= OUT_CHARGE
        self.relays = bits

    def bits(self):
        """Return all relay coils, the shunt's included."""
        shunt = LEVELS[self.level][0]
        if shunt == 0:
            return self.relays
        if shunt == 1:
            return self.relays | OUT_LOW_OPEN | OUT_MID_SHUNT
        return self.relays | OUT_LOW_OPEN

    def read_on(self, level, now):
        """Read the shunt on this level from the next conversion on. Ends the present window."""
        if level == self.level:
            return
        self.cut(now)
        blank = self.shunts.blank_ms(self.level, level, self.capacitance_nf)
        self.level = level
        shunt, fine = LEVELS[level]
        self.front.select(shunt, fine, now, blank)

    def low(self, now, fine=WIDE):
        """Go to the low shunt."""
        self.read_on(LOW_FINE if fine == FINE else LOW_WIDE, now)

    def part_scale(self, fine, now):
        """Choose the full scale of the part's divider. Ends the present window."""
        if self.front.part_fine != fine:
            self.cut(now)
            self.front.part_fine = fine

    def cut(self, now):
        """End the window here, whole or not, so that no row mixes two circumstances."""
        self.cut_now = True
        self.front.close(now, self.recording, ticks_diff(now, self.base_ms), self.stage, self.flags)

    def gone(self, now):
        """Return the milliseconds since this stage began."""
        return ticks_diff(now, self.stage_ms)

    def path_na(self):
        """Return the current through the charge resistors, from the two dividers, in nanoamperes."""
        front = self.front
        return (front.supply_mv - front.part_mv) * 1000 // (self.ratings.charge_ohm // 1000)

    def divider_na(self, mv):
        """Return the part divider's own current in nanoamperes."""
        return mv * 1000 // self.ratings.divider_kohm

    def witness(self, now):
        """Look at the charge path over a whole window: what the supply gives, less what 400 kohm drops, is what the part has."""
        front = self.front
        self.astray = False
        if not self.supply.quiet(now) or not front.settled(now) or front.clipped or self.supply.ramping:
            return
        mv = front.mean_part_mv
        drop_mv = (
            (front.na(front.mean_code10) // 10 + self.divider_na(mv))
            * (self.ratings.charge_ohm // 1000)
            // 1000
        )
        left_mv = self.supply.mv - drop_mv
        if left_mv > self.ratings.safe_mv:
            self.proof.never_charged = (
                False  # the part may have taken charge: its divider must vouch otherwise
            )
        if self.relays == _ON_CHARGE:
            slack_mv = self.supply.mv // 1000 * _PATH_PM + _PATH_MV
            self.astray = not -slack_mv <= left_mv - mv <= slack_mv
