"""Every single fault that a scenario may ask for, and the clock that starts and ends them.

`[[fault]]` has `kind`, `at_s`, `for_s` (absent: for good; a fault of the part ends when it is taken out),
`run` (1 the first, the default; 0: `at_s` counts from power-up) and what its row below names. trouble.py
does to the world what each says.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any, NamedTuple

from dwellbench.emulator import strict
from dwellbench.errors import UsageError

NEVER_US = 1 << 62
_OHM = strict.number(above=0.0, most=1e15)


class Kind(NamedTuple):
    """One row: what happens, and its own keys with their check and default."""

    text: str
    keys: dict[str, tuple[strict.Check, Any]] = {}  # noqa: RUF012 - never changed


_LEVEL = (strict.one_of(0, 1), 0)
_UNIT = (strict.one_of(0, 1), 0)
KINDS: dict[str, Kind] = {
    # people and lid
    "lid_open": Kind("the lid is forced open, lock or no lock"),
    "stop_pressed": Kind("the stop button is pressed"),
    "lid_switch_stuck": Kind("one lid switch stays at `level`", {
        "which": (strict.one_of("a", "b"), "a"),
        "level": (strict.one_of("closed", "open"), "closed")}),
    "lock_fails": Kind("the bolt does not move, or is at `position` whatever it is told", {
        "position": (strict.one_of("stays", "open", "locked"), "stays")}),
    # relays and paths
    "charge_relay_welded": Kind("the charge relay stays on the charge path once it is there"),
    "charge_relay_dead": Kind("the charge relay does not pull"),
    "charge_path_open": Kind("a charge resistor is broken"),
    "bleed_open": Kind("a bleed resistor is broken", {"which": (strict.one_of(1, 2), 1)}),
    "bleed_welded": Kind("the first bleed stays in circuit once it is"),
    "bleed_relay_stuck": Kind("the first bleed's relay does not move any more"),
    "shunt_relay_stuck": Kind("a shunt relay does not move any more, or is at `position`", {
        "which": (strict.one_of("low", "mid"), "low"),
        "position": (strict.one_of("stays", "rest", "work"), "stays")}),
    "fixture_dirty": Kind("dirt of `ohm` across the clips", {"ohm": (_OHM, 1e10)}),
    # witnesses
    "divider_open": Kind("a leg of a divider is broken: reads nothing, or far too much", {
        "which": (strict.one_of("part", "supply"), "part"), "leg": (strict.one_of("top", "bottom"), "top")}),
    "divider_off": Kind("a divider reads `factor` times what it should", {
        "which": (strict.one_of("part", "supply"), "part"),
        "factor": (strict.number(above=0.0, most=100.0), 0.5)}),
    "detector_stuck": Kind("the high-voltage detector stays at `level`", {"level": _LEVEL}),
    "converter_silent": Kind("a converter does not answer", {"unit": _UNIT}),
    "converter_stuck": Kind("a converter gives the same code for ever", {
        "unit": _UNIT, "code": (strict.whole(-32768, 32767), 0)}),
    "reference_off": Kind("a converter's reference is off by `fraction`", {
        "unit": _UNIT, "fraction": (strict.number(least=-1.0, most=4.0), 0.05)}),
    "thermistor_open": Kind("the thermistor is broken"),
    "thermistor_shorted": Kind("the thermistor is shorted"),
    "over_temperature": Kind("the part warms to `to_C`", {
        "to_C": (strict.number(least=-50.0, most=200.0), 85.0), "over_s": (strict.number(least=0.0), 5.0)}),
    # supply
    "supply_overvoltage": Kind("the supply stands `by_V` above its setting", {
        "by_V": (strict.number(least=-1000.0, most=1000.0), 60.0)}),
    "supply_stuck_on": Kind("the supply neither switches off nor follows its setting", {
        "volts": (strict.number(least=0.0, most=1000.0), None)}),
    "supply_dead": Kind("the supply gives nothing"),
    "supply_drift": Kind("the supply drifts", {"V_per_s": (strict.number(least=-100.0, most=100.0), 0.05)}),
    "enable_stuck": Kind("the supply stays enabled without being pumped"),
    # the part
    "part_shorts": Kind("the part breaks down to `ohm`", {"ohm": (_OHM, 50.0)}),
    "part_leaks": Kind("the part begins to leak through `ohm`", {"ohm": (_OHM, 1e6)}),
    "part_opens": Kind("a lead of the part lets go"),
    # controller and link
    "controller_hung": Kind("the controller does nothing more, outputs as they are"),
    "controller_reset": Kind("the controller is reset"),
    "power_lost": Kind("the whole box loses its power"),
    "link_silent": Kind("nothing passes the link, either way"),
    "clock_wrap": Kind("the controller's millisecond counter wraps at `at_s`; only with run = 0"),
    "clock_jump": Kind("the controller's millisecond counter jumps", {
        "by_ms": (strict.whole(-(2**29), 2**29), 60_000)}),
}  # fmt: skip
PART_KINDS = frozenset({"part_shorts", "part_leaks", "part_opens"})
_DEFAULT_RUN = {"clock_wrap": 0}


@dataclass(frozen=True)
class Fault:
    """One fault of a scenario. `more` has the kind's own keys, all of them."""

    kind: str
    at_s: float = 0.0
    for_s: float | None = None
    run: int = 1
    more: dict[str, Any] = field(default_factory=dict, hash=False)


_COMMON: dict[str, strict.Check] = {
    "kind": strict.text,
    "at_s": strict.number(least=0.0, most=1e7),
    "for_s": strict.number(above=0.0, most=1e7),
    "run": strict.whole(0, 100_000),
}


def read_fault(source: str, where: str, raw: Any) -> Fault:
    """A fault from its table; UsageError for what is not known."""
    kind = raw.get("kind") if isinstance(raw, dict) else None
    if not isinstance(kind, str) or kind not in KINDS:
        known = ", ".join(sorted(KINDS))
        raise UsageError(
            f"{source}: {where} has no known kind ({kind!r})", remedy=f"Known are: {known}.", file=source
        )
    own = KINDS[kind].keys
    checks = {**_COMMON, **{key: check for key, (check, _) in own.items()}}
    values = strict.read_table(source, where, raw, checks)
    more = {key: values.pop(key, default) for key, (_, default) in own.items()}
    fault = Fault(**{"run": _DEFAULT_RUN.get(kind, 1), **values}, more=more)
    if kind == "clock_wrap" and fault.run:
        raise UsageError(
            f"{source}: {where}: clock_wrap is set at power-up",
            remedy="Take run out or write run = 0.",
            file=source,
        )
    return fault


@dataclass
class _Running:
    index: int
    begin_us: int
    end_us: int
    on: bool = False


class FaultClock:
    """Which faults are on. `begin` starts the clocks of a run's faults; `changes` says what starts and
    ends by a time."""

    def __init__(self, faults: tuple[Fault, ...]) -> None:
        self.faults = faults
        self._running: list[_Running] = []
        self.next_us = NEVER_US
        self.begin(0, 0)

    def begin(self, run: int, now_us: int) -> None:
        """Run number `run` begins now."""
        for i, fault in enumerate(self.faults):
            if fault.run == run:
                begin = now_us + round(fault.at_s * 1e6)
                end = NEVER_US if fault.for_s is None else begin + round(fault.for_s * 1e6)
                self._running.append(_Running(i, begin, end))
        self._next()

    def _next(self) -> None:
        times = [running.end_us if running.on else running.begin_us for running in self._running]
        self.next_us = min(times, default=NEVER_US)

    def changes(self, now_us: int) -> list[tuple[Fault, bool]]:
        """Faults that start (True) or end (False) up to `now_us`, ends first."""
        ends = [r for r in self._running if r.on and r.end_us <= now_us]
        starts = [r for r in self._running if not r.on and r.begin_us <= now_us]
        for running in starts:
            running.on = True
        self._running = [r for r in self._running if r not in ends]
        self._next()
        return [(self.faults[r.index], False) for r in ends] + [(self.faults[r.index], True) for r in starts]

    def active(self) -> list[Fault]:
        """Those that are on."""
        return [self.faults[r.index] for r in self._running if r.on]

    def drop(self, kinds: Iterable[str]) -> list[Fault]:
        """Forget those of these kinds that are on (the part they belong to is out); gives them."""
        gone = [r for r in self._running if r.on and self.faults[r.index].kind in kinds]
        self._running = [r for r in self._running if r not in gone]
        self._next()
        return [self.faults[r.index] for r in gone]

    def state(self) -> list[list[int]]:
        """JSON-able."""
        return [[r.index, r.begin_us, r.end_us, int(r.on)] for r in self._running]

    def load(self, kept: list[list[int]]) -> None:
        """Take up what `state` gave; the world sets the faults that are on once more."""
        self._running = [_Running(i, begin, end, bool(on)) for i, begin, end, on in kept]
        self._next()
