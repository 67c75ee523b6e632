"""The places in a circuit that a capacitor can go to, as data: what each tolerates, at what voltage, and on
whose word.

`rule` names how a place is judged (see `demands`):

* `grid_shift`: what leaks through lifts the grid behind it: Va Rg / (Rg + R) must stay below `tolerated`
  volts.
* `series_share`: insulation must be at least `tolerated` times the resistance that feeds it.
* `filter`: leakage by the period's own formula for electrolytics at the marked values.
* `never`: a short there puts mains or high voltage on something that is touched; no test on a bench makes a
  part fit for it.
* `pulse`: stressed by pulses beyond this box; at best undecided.

Voltages are the place's highest, before the valves conduct.
"""

from __future__ import annotations

from dataclasses import dataclass

COMMON = "common practice, no source"
TWENTY = "rule of thumb of insulation 20 times the feeding resistance, Silicon Chip, Vintage Radio, 2003"

GRID_SHIFT, SERIES_SHARE, FILTER, NEVER, PULSE = "grid_shift", "series_share", "filter", "never", "pulse"


@dataclass(frozen=True)
class PlaceKind:
    """One kind of place: what it is, how it is judged, its usual numbers (unless the role gives others)."""

    id: str
    what: str
    rule: str
    volts_V: float | None
    series_ohm: float | None
    tolerated: float | None
    unit: str
    source: str
    numbers_source: str = COMMON
    temperature_C: float = 45.0  # inside a working chassis; common practice, no source


def _never(name: str, what: str) -> PlaceKind:
    return PlaceKind(
        name, what, NEVER, None, None, None, "", "licensed practice: a part with its own safety approval"
    )


_SHIFT = "voltage divider of insulation and grid leak; 0.1 V tolerated is common practice, no source"

KINDS = (
    PlaceKind("coupling", "plate to the next grid", GRID_SHIFT, 310.0, 470e3, 0.1, "V", _SHIFT),
    PlaceKind("cathode_bypass", "across a cathode resistor", SERIES_SHARE, 25.0, 1e3, 20.0, "times", TWENTY),
    PlaceKind(
        "screen_bypass",
        "screen to ground behind its dropping resistor",
        SERIES_SHARE,
        310.0,
        100e3,
        20.0,
        "times",
        TWENTY,
    ),
    PlaceKind(
        "plate_decoupling",
        "stage supply to ground behind its resistor",
        SERIES_SHARE,
        310.0,
        47e3,
        20.0,
        "times",
        TWENTY,
    ),
    PlaceKind(
        "avc", "automatic volume control line to ground", SERIES_SHARE, 50.0, 2e6, 20.0, "times", TWENTY
    ),
    PlaceKind(
        "tone", "plate to ground through the tone control", SERIES_SHARE, 310.0, 100e3, 20.0, "times", TWENTY
    ),
    PlaceKind(
        "supply_filter",
        "rectifier output or filter choke to ground",
        FILTER,
        None,
        None,
        None,
        "A",
        "JAN-C-62 leakage formula (k C + 0.3 mA), as quoted by amateur radio mailing lists",
    ),
    PlaceKind("buffer", "across the vibrator transformer", PULSE, 1600.0, None, None, "", COMMON),
    PlaceKind("plate_to_plate", "plate to plate of an output stage", PULSE, 600.0, None, None, "", COMMON),
    _never("across_the_line", "line to line, ahead of or behind the switch"),
    _never("line_to_chassis", "either side of the line to the chassis"),
    _never("chassis_to_negative", "chassis to the negative rail of a set without a transformer"),
    _never("aerial_isolation", "aerial terminal to the set"),
    _never("earth_isolation", "earth terminal to the chassis of a set without a transformer"),
    _never("pickup_isolation", "pick-up sockets of a set without a transformer"),
    _never("headphone_isolation", "headphone sockets of a set without a transformer"),
    _never("speaker_isolation", "loudspeaker sockets of a set without a transformer"),
)

BY_ID = {kind.id: kind for kind in KINDS}
