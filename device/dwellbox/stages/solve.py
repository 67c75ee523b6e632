"""What charge and voltage of the look make of a part: its capacitance, and whether leakage hides it.

Over the ramp and over the hold, charge = C rise + G area, two equations for C and G, where area is the voltage summed over time.
They are solved together once the voltage stands, for then the hold says what leaks. While it still rises, as a large part's does,
the two are nearly the same equation, and the plain quotient of charge and rise is the better answer: leakage at 20 V is a small
part of the charging current there.
"""

from ..compat import const

# So many times more leaked than was stored: a per cent of doubt in the one is three in the other.
_BLURRED = const(3)


def standing(charge_fc, rise_mv, change_mv, current_pa, ms):
    """Say whether the voltage stands: what it changed by in the last `ms` takes less than half of the current."""
    if -12 <= change_mv <= 12:  # a code and a half of the divider's fine range
        return True
    if change_mv < 0 or rise_mv <= 0:
        return False
    return charge_fc // rise_mv * change_mv * 2 <= current_pa * ms


def capacitance_pf(ramp, whole, stands):
    """Return (picofarads, blurred) from (charge fC, rise mV, area mV ms) of the ramp and of ramp and hold together."""
    charge1, rise1, area1 = ramp
    charge, rise, area = whole
    plain = max(charge // max(rise, 1), 0)
    if not stands:
        return plain, False
    charge2 = charge - charge1
    rise2 = rise - rise1
    area2 = area - area1
    below = rise1 * area2 - rise2 * area1
    if below <= 0:
        return plain, False
    pf = max((charge1 * area2 - charge2 * area1) // below, 0)
    stored = pf * rise
    return pf, charge - stored > _BLURRED * stored
