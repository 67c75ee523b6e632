"""Numbers as people at a bench say them: three figures, a prefix, the unit."""

from __future__ import annotations

from math import floor, log10

_PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T", 15: "P"}


def si(value: float | None, unit: str, figures: int = 3) -> str:
    """`si(3.01e10, "ohm")` is "30.1 Gohm"; None is "unknown"."""
    if value is None:
        return "unknown"
    if value == 0.0:
        return f"0 {unit}"
    step = _step(value)
    number = f"{value / 10.0**step:.{figures}g}"
    if abs(float(number)) >= 1000.0 and step < 15:  # rounding carried it into the next prefix
        step += 3
        number = f"{value / 10.0**step:.{figures}g}"
    if "e" in number:
        number = f"{float(number):.0f}"
    return f"{number} {_PREFIXES[step]}{unit}"


def with_doubt(value: float, half: float, unit: str) -> str:
    """Value and half width in one unit, the half width to two figures (JCGM 100:2008, 7.2.6): "48.00 \u00b1 0.22 nF"."""
    step = 0 if value == 0.0 else _step(value)
    value, half = value / 10.0**step, half / 10.0**step
    places = min(max(1 - floor(log10(half)), 0), 6) if half > 0.0 else 0
    return f"{value:.{places}f} \u00b1 {half:.{places}f} {_PREFIXES[step]}{unit}"


def _step(value: float) -> int:
    """The power of a thousand, as a power of ten, that leaves one to three digits before the point."""
    return min(max(3 * floor(log10(abs(value) * (1 + 1e-12)) / 3), -15), 15)


def volts(value: float | None) -> str:
    """Volts without a prefix: 628 V, 4.7 V."""
    return "unknown" if value is None else f"{value:.3g} V" if abs(value) < 1000.0 else f"{value:.0f} V"


def seconds(value: float) -> str:
    """Seconds, minutes above two of them."""
    return f"{value:.3g} s" if value < 120.0 else f"{value / 60.0:.3g} min"
