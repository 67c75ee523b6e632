"""A scenario: which parts are fitted one after the other, by what operator, into what box, and what goes
wrong when.

TOML, read strictly. Packaged ones lie in `scenarios/` and are named without ending (`film`); anything else
is a file. All numbers in SI units. What a key means is said here and, for the longer tables, in
forming.py, front_end.py and faults.py.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from dwellbench.emulator import strict
from dwellbench.emulator.faults import Fault, read_fault
from dwellbench.emulator.front_end import FRONT_END_KEYS
from dwellbench.emulator.part_spec import PartSpec, read_part
from dwellbench.errors import UsageError

_PACKAGED = Path(__file__).resolve().parent / "scenarios"
_SECONDS = strict.number(least=0.0, most=1e7)


@dataclass(frozen=True)
class OperatorSpec:
    """The lid is opened `opens_after_s` after the lock lets go, and closed over the next part `handling_s`
    later."""

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
                f"There is no scenario {name!r}: {error.strerror}",
                remedy=f"Packaged are: {known}.",
                file=str(name),
            ) from None
        except UnicodeDecodeError:
            raise UsageError(
                f"{name} is not UTF-8 text", remedy="Give a TOML file.", file=str(name)
            ) from None

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
            operator=OperatorSpec(
                **strict.read_table(source, "[operator]", values.pop("operator", {}), _OPERATOR)
            ),
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


def _tables(source: str, name: str, raw: Any) -> list[Any]:
    if not isinstance(raw, list):
        raise UsageError(
            f"{source}: {name} must be written [[{name}]]", remedy=f"Use [[{name}]].", file=source
        )
    return raw


def _front_end(source: str, raw: Any) -> dict[str, Any] | None:
    return None if raw is None else strict.read_table(source, "[front_end]", raw, FRONT_END_KEYS)


def _parts(source: str, raw: Any) -> tuple[PartSpec, ...]:
    """Every fitting in order. A table with nothing but the label of an earlier part, and a `repeat`, fit
    that very part again."""
    fitted: list[PartSpec] = []
    for i, table in enumerate(_tables(source, "part", raw), 1):
        again = _again(fitted, table)
        if again is not None:
            fitted.append(replace(fitted[again], same_as=again))
            continue
        spec, repeat = read_part(source, f"[[part]] {i}", table)
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
