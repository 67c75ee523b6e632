"""`[[part]]`: one capacitor as it comes to the box, and the reading of its table."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from dwellbench.emulator import strict
from dwellbench.emulator.forming import Forming
from dwellbench.errors import UsageError

_OHM = strict.number(above=0.0, most=1e18)
_SECONDS = strict.number(least=0.0, most=1e7)


@dataclass(frozen=True)
class Superlinear:
    """Extra current (V/at_V)^exponent * at_V/ohm_there."""

    at_V: float
    ohm_there: float
    exponent: float


@dataclass(frozen=True)
class LateLeak:
    """A leak of `ohm` that starts once the part has spent `after_s` above `above_V`."""

    after_s: float
    ohm: float
    above_V: float = 10.0


@dataclass(frozen=True)
class Intermittent:
    """A lead that lets go, or a leak of `ohm` that comes, for `for_s` every `every_s` (means of
    exponential times)."""

    what: str  # "lead" or "leak"
    every_s: float = 5.0
    for_s: float = 0.02
    ohm: float = 1e6


@dataclass(frozen=True)
class PartSpec:
    """One capacitor as it comes to the box. Farads, ohms, volts, seconds."""

    label: str = ""
    marking: str = ""  # this, role and expect are for tests and demo; the physics does not read them
    role: str = ""
    expect: Any = None
    note: str = ""
    capacitance_F: float = 0.0
    leakage_ohm: float = 1e15
    esr_ohm: float = 0.1
    absorption: tuple[tuple[float, float], ...] = ()
    superlinear: Superlinear | None = None
    short_ohm: float | None = None
    open_lead: bool = False
    initial_V: float = 0.0
    reversed: bool = False  # fitted the wrong way round; needs forming
    forming: Forming | None = None
    late_leak: LateLeak | None = None
    intermittent: Intermittent | None = None
    same_as: int | None = None  # index of the part this is again, with all it remembers


def _ladder(value: Any) -> tuple[tuple[float, float], ...]:
    if not isinstance(value, list) or len(value) > 8:
        raise ValueError("must be a list of at most 8 pairs [seconds, share]")
    pair = strict.numbers(2, strict.number(above=0.0, most=1e6))
    pairs = tuple(pair(item) for item in value)
    if any(share > 1.0 for _, share in pairs):
        raise ValueError("has a share above 1: it is the share of the capacitance")
    return pairs


_PART: dict[str, strict.Check] = {
    "label": strict.text,
    "marking": strict.text,
    "role": strict.text,
    "expect": strict.anything,
    "note": strict.text,
    "capacitance_F": strict.number(above=0.0, most=1.0),
    "leakage_ohm": _OHM,
    "esr_ohm": strict.number(least=0.0, most=1e6),
    "absorption": _ladder,
    "superlinear": strict.anything,
    "short_ohm": strict.number(above=0.0, most=1e9),
    "open_lead": strict.flag,
    "initial_V": strict.number(least=-2000.0, most=2000.0),
    "reversed": strict.flag,
    "forming": strict.anything,
    "late_leak": strict.anything,
    "intermittent": strict.anything,
    "repeat": strict.whole(1, 10000),
}
_SUPERLINEAR: dict[str, strict.Check] = {
    "at_V": strict.number(least=1.0),
    "ohm_there": _OHM,
    "exponent": strict.number(least=1.0, most=30.0),
}
_LATE: dict[str, strict.Check] = {"after_s": _SECONDS, "ohm": _OHM, "above_V": strict.number(least=0.0)}
_INTERMITTENT: dict[str, strict.Check] = {
    "what": strict.one_of("lead", "leak"),
    "every_s": strict.number(least=0.01, most=1e6),
    "for_s": strict.number(least=0.0005, most=1e6),
    "ohm": _OHM,
}
_FORMING: dict[str, strict.Check] = {
    "formed_V": strict.number(least=1.0, most=2000.0),
    "limit_V": strict.number(least=1.0, most=2000.0),
    "formed_A": strict.number(above=0.0, most=1.0),
    "exponent": strict.number(least=1.0, most=30.0),
    "coulomb_per_V": strict.number(above=0.0),
    "cracks_A": strict.number(least=0.0, most=1.0),
    "cracks_C": strict.number(above=0.0),
    "settle_s": strict.number(above=0.0),
    "relax_s": strict.number(above=0.0),
    "reverse_V": strict.number(least=0.1, most=100.0),
}


def _sub(
    source: str, where: str, values: dict[str, Any], key: str, fields: dict[str, strict.Check], need: set[str]
) -> Any:
    """The checked sub-table `key` with everything in `need`, or None."""
    if key not in values:
        return None
    table = strict.read_table(source, f"{key} of {where}", values[key], fields)
    missing = sorted(need - table.keys())
    if missing:
        lacks = ", ".join(missing)
        raise UsageError(
            f"{source}: {key} of {where} lacks {lacks}", remedy=f"Add {lacks}.", file=source, key=key
        )
    return table


def read_part(source: str, where: str, raw: Any) -> tuple[PartSpec, int]:
    values = strict.read_table(source, where, raw, _PART)
    repeat = values.pop("repeat", 1)
    made: dict[str, Any] = {
        "superlinear": _sub(source, where, values, "superlinear", _SUPERLINEAR, set(_SUPERLINEAR)),
        "late_leak": _sub(source, where, values, "late_leak", _LATE, {"after_s", "ohm"}),
        "intermittent": _sub(source, where, values, "intermittent", _INTERMITTENT, {"what"}),
        "forming": _sub(source, where, values, "forming", _FORMING, {"formed_V"}),
    }
    kinds = {"superlinear": Superlinear, "late_leak": LateLeak, "intermittent": Intermittent}
    for key, kind in kinds.items():
        values[key] = kind(**made[key]) if made[key] is not None else None
    forming = made["forming"]
    values["forming"] = Forming(**{"limit_V": 1.1 * forming["formed_V"], **forming}) if forming else None
    spec = PartSpec(**values)
    _check_part(source, where, spec)
    return spec, repeat


def _check_part(source: str, where: str, spec: PartSpec) -> None:
    wrong = None
    if not spec.capacitance_F and spec.short_ohm is None and not spec.open_lead:
        wrong = "says nothing of its capacitance", "Give capacitance_F, short_ohm or open_lead."
    elif spec.short_ohm is not None and spec.open_lead:
        wrong = "is both shorted and open", "Keep one of short_ohm and open_lead."
    elif spec.reversed and spec.forming is None:
        wrong = "is reversed but has no polarity", "Add [part.forming] or take reversed out."
    if wrong:
        raise UsageError(f"{source}: {where} {wrong[0]}", remedy=wrong[1], file=source)
