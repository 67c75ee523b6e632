"""The person at the bench: waits for the lock to let go after a run, opens the lid, takes the part out,
fits the next, closes.

Knows nothing but what can be seen and heard: that a run has been, and that the bolt is back.
"""

from __future__ import annotations

from typing import Protocol

from dwellbench.emulator.faults import NEVER_US
from dwellbench.emulator.scenario import OperatorSpec

WAITING, OPENING, TAKING_OUT, FITTING, CLOSING = range(5)
_OUT_AT, _IN_AT = 0.25, 0.75  # of the handling time


class Bench(Protocol):
    """What the operator can do."""

    def bolt_is_open(self) -> bool: ...

    def open_lid(self) -> None: ...

    def take_out(self) -> None: ...

    def fit_next(self) -> None: ...

    def close_lid(self) -> None: ...


class Operator:
    """One pass from WAITING to WAITING for every run."""

    def __init__(self, spec: OperatorSpec) -> None:
        self._spec = spec
        self.phase = WAITING
        self.run_seen = False
        self.next_us = NEVER_US

    def notice_run(self) -> None:
        """A run has begun."""
        self.run_seen = True

    def notice_bolt(self, now_us: int) -> None:
        """The bolt has let go."""
        if self.phase == WAITING and self.run_seen:
            self._go(OPENING, now_us + self._us(self._spec.opens_after_s))

    def tick(self, bench: Bench, now_us: int) -> None:
        """Do what is due."""
        handling = self._spec.handling_s
        if self.phase == OPENING:
            self._open(bench, now_us)
        elif self.phase == TAKING_OUT:
            bench.take_out()
            self._go(FITTING, now_us + self._us((_IN_AT - _OUT_AT) * handling))
        elif self.phase == FITTING:
            bench.fit_next()
            closes = now_us + self._us((1.0 - _IN_AT) * handling) if self._spec.closes_lid else NEVER_US
            self._go(CLOSING, closes)
        elif self.phase == CLOSING:
            bench.close_lid()
            self._go(WAITING, NEVER_US)

    def _open(self, bench: Bench, now_us: int) -> None:
        if not bench.bolt_is_open():  # a run began meanwhile, or the lock thought better of it
            self._go(WAITING, NEVER_US)
            return
        self.run_seen = False
        bench.open_lid()
        self._go(TAKING_OUT, now_us + self._us(_OUT_AT * self._spec.handling_s))

    def _go(self, phase: int, at_us: int) -> None:
        self.phase, self.next_us = phase, at_us

    @staticmethod
    def _us(seconds: float) -> int:
        return round(seconds * 1e6)

    def state(self) -> list[int]:
        """JSON-able."""
        return [self.phase, int(self.run_seen), self.next_us]

    def load(self, kept: list[int]) -> None:
        """Take up what `state` gave."""
        self.phase, self.run_seen, self.next_us = kept[0], bool(kept[1]), kept[2]
