"""A scenario: which parts are fitted one after the other, by what operator, into what box, and what goes wrong when.

TOML, read strictly. Packaged ones lie in `scenarios/` and are named without ending (`film`); anything else is a file. All numbers
in SI units. What a key means is said here and, for the longer tables, in forming.py, front_end.py and faults.py.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from dwellbench.emulator import strict
from dwellbench.emulator.faults import Fault, read_fault
from dwellbench.emulator.forming import Forming
from dwellbench.emulator.front_end import FRONT_END_KEYS
from dwellbench.errors import UsageError

_PACKAGED = Path(__file__).resolve().parent / "scenarios"
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
    """A lead that lets go, or a leak of `ohm` that comes, for `for_s` every `every_s` (means of exponential times)."""

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


@dataclass(frozen=True)
class OperatorSpec:
    """The lid is opened `opens_after_s` after the lock lets go, and closed over the next part `handling_s` later."""

    handling_s: float = 20.0
    opens_after_s: float = 1.0
    closes_lid: bool = True  # false: after the first opening the lid stays open


@dataclass(frozen=True)
class Scenario:
    """What the world is made from."""

    name: str = "scenario"
    seed: int = 1
    ambient_C: float = 23.0
    humidity_percent: float = 45.0
    clock_ms: int = 0  # the controller's millisecond counter at power-up, to bring its wrap within reach
    operator: OperatorSpec = OperatorSpec()
    parts: tuple[PartSpec, ...] = ()
    front_end: dict[str, Any] | None = field(default=None)
    faults: tuple[Fault, ...] = ()

    @classmethod
    def load(cls, name: str) -> Scenario:
        """A packaged scenario by name, or a file by path. UsageError for what is not there or not right."""
        path = packaged().get(name, Path(name))
        try:
            return cls.parse(path.read_text("utf-8"), source=str(name), name=path.stem)
        except OSError as error:
            known = ", ".join(sorted(packaged()))
            raise UsageError(
                f"There is no scenario {name!r}: {error.strerror}", remedy=f"Packaged are: {known}.", file=str(name)
            ) from None
        except UnicodeDecodeError:
            raise UsageError(f"{name} is not UTF-8 text", remedy="Give a TOML file.", file=str(name)) from None

    @classmethod
    def parse(cls, text: str, source: str = "scenario", name: str = "scenario") -> Scenario:
        """A scenario from TOML text; `source` names it in messages."""
        try:
            raw = tomllib.loads(text)
        except tomllib.TOMLDecodeError as error:
            raise UsageError(f"{source}: {error}", remedy="Correct the TOML there.", file=source) from None
        values = strict.read_table(source, "the top level", raw, _TOP)
        return cls(
            name=name,
            operator=OperatorSpec(**strict.read_table(source, "[operator]", values.pop("operator", {}), _OPERATOR)),
            parts=_parts(source, values.pop("part", [])),
            front_end=_front_end(source, values.pop("front_end", None)),
            faults=tuple(
                read_fault(source, f"[[fault]] {i}", table)
                for i, table in enumerate(_tables(source, "fault", values.pop("fault", [])), 1)
            ),
            **values,
        )

    def with_seed(self, seed: int | None) -> Scenario:
        """The same with another seed, if one is given."""
        return self if seed is None else replace(self, seed=seed)


def packaged() -> dict[str, Path]:
    """The packaged scenarios by name."""
    return {path.stem: path for path in sorted(_PACKAGED.glob("*.toml"))}


def _ladder(value: Any) -> tuple[tuple[float, float], ...]:
    if not isinstance(value, list) or len(value) > 8:
        raise ValueError("must be a list of at most 8 pairs [seconds, share]")
    pair = strict.numbers(2, strict.number(above=0.0, most=1e6))
    pairs = tuple(pair(item) for item in value)
    if any(share > 1.0 for _, share in pairs):
        raise ValueError("has a share above 1: it is the share of the capacitance")
    return pairs


_TOP: dict[str, strict.Check] = {
    "seed": strict.whole(0, 2**63 - 1),
    "ambient_C": strict.number(least=-20.0, most=60.0),
    "humidity_percent": strict.number(least=0.0, most=100.0),
    "clock_ms": strict.whole(0, 2**30 - 1),
    "operator": strict.anything,
    "part": strict.anything,
    "front_end": strict.anything,
    "fault": strict.anything,
}
_OPERATOR: dict[str, strict.Check] = {
    "handling_s": _SECONDS,
    "opens_after_s": _SECONDS,
    "closes_lid": strict.flag,
}
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


def _tables(source: str, name: str, raw: Any) -> list[Any]:
    if not isinstance(raw, list):
        raise UsageError(f"{source}: {name} must be written [[{name}]]", remedy=f"Use [[{name}]].", file=source)
    return raw


def _front_end(source: str, raw: Any) -> dict[str, Any] | None:
    return None if raw is None else strict.read_table(source, "[front_end]", raw, FRONT_END_KEYS)


def _sub(source: str, where: str, values: dict[str, Any], key: str, fields: dict[str, strict.Check], need: set[str]) -> Any:
    """The checked sub-table `key` with everything in `need`, or None."""
    if key not in values:
        return None
    table = strict.read_table(source, f"{key} of {where}", values[key], fields)
    missing = sorted(need - table.keys())
    if missing:
        lacks = ", ".join(missing)
        raise UsageError(f"{source}: {key} of {where} lacks {lacks}", remedy=f"Add {lacks}.", file=source, key=key)
    return table


def _part(source: str, where: str, raw: Any) -> tuple[PartSpec, int]:
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


def _parts(source: str, raw: Any) -> tuple[PartSpec, ...]:
    """Every fitting in order. A table with nothing but the label of an earlier part, and a `repeat`, fit that very part again."""
    fitted: list[PartSpec] = []
    for i, table in enumerate(_tables(source, "part", raw), 1):
        again = _again(fitted, table)
        if again is not None:
            fitted.append(replace(fitted[again], same_as=again))
            continue
        spec, repeat = _part(source, f"[[part]] {i}", table)
        first = len(fitted)
        fitted.append(spec)
        fitted += [replace(spec, same_as=first)] * (repeat - 1)
    return tuple(fitted)


def _again(fitted: list[PartSpec], table: Any) -> int | None:
    if not isinstance(table, dict) or set(table) != {"label"}:
        return None
    for i, spec in enumerate(fitted):
        if spec.label == table["label"] and spec.same_as is None:
            return i
    return None
