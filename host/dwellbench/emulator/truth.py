"""What is really so in the emulated box; for tests and nobody else."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Harm:
    """Someone could have touched something charged: when, what was on it, how it came about."""

    t_s: float
    volts: float
    stored_J: float
    why: str


@dataclass(frozen=True)
class Truth:
    """The world at one instant. Seconds, volts, joules, coulombs, farads, amperes."""

    t_s: float
    part_index: int  # into scenario.parts, 0 the first; -1 while nothing is fitted
    part_label: str
    part_V: float  # across the part's own plates, whatever its leads do
    node_V: float  # high node to ground
    low_V: float
    supply_V: float
    stored_J: float  # in plates and ladder of the part
    stored_C: float
    capacitance_F: float
    leakage_A: float  # conduction through the part alone, absorption left out
    lid_open: bool
    bolt_closed: bool
    supply_on: bool
    bleeding: bool  # a way down through either bleed exists for the high node
    connected: bool  # both leads of the part
    runs: int
    harms: tuple[Harm, ...]  # every one since the start

    @property
    def hurt(self) -> bool:
        """Has anyone been in danger since the start?"""
        return bool(self.harms)
