"""The thermistor beside the part: converter code to temperature, by a table and straight lines between its points.

10 kohm at 25 C, B25/85 = 3977 K, on a 10 kohm pull-up from 1.000 V. Resistances from the published table of such parts
(-20 C 96358 ohm ... 85 C 1070 ohm; from memory, confirmed within 0.011 C by the makers' published third-order equation).
"""

# (temperature in millidegrees, ohm)
_POINTS = (
    (-20000, 96358),
    (-10000, 55046),
    (0, 32554),
    (10000, 19872),
    (20000, 12488),
    (25000, 10000),
    (30000, 8059),
    (40000, 5330),
    (50000, 3606),
    (60000, 2490),
    (70000, 1753),
    (85000, 1070),
)


def code_of(ohm):
    """Return the converter's code at +/-1.024 V for a thermistor of `ohm`."""
    return 1000 * ohm // (ohm + 10000) * 32768 // 1024


def code_at(temp_mc):
    """Return the code at a temperature in millidegrees; the code falls as it warms."""
    before = _POINTS[0]
    for point in _POINTS:
        if point[0] >= temp_mc:
            return _between(temp_mc, before[0], code_of(before[1]), point[0], code_of(point[1]))
        before = point
    return code_of(_POINTS[-1][1])


def temperature_mc(code):
    """Return the temperature in millidegrees for a code; clamped to the table's ends."""
    before = _POINTS[0]
    for point in _POINTS:
        if code_of(point[1]) <= code:
            return _between(code, code_of(before[1]), before[0], code_of(point[1]), point[0])
        before = point
    return _POINTS[-1][0]


def _between(x, x0, y0, x1, y1):
    return y1 if x1 == x0 else y0 + (y1 - y0) * (x - x0) // (x1 - x0)
