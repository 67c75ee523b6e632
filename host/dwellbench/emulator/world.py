"""The whole bench in virtual time: box without its controller, part, operator and faults, one control period a call.

A board asks for nothing but `period`, `inputs`, `codes` and the few flags; what only a test may know is behind `truth`.
Nothing here reads a clock or sleeps: time passes when `period` is called, and the same scenario, seed and calls give the
same codes on every machine.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from dwellbench.emulator.scenario import Scenario

PERIOD_US = 5000
NO_CODE = 40000
"""What `codes` holds when the chip did not answer or nothing was started."""
NO_CONVERSION = -1
CAUSE_POWER, CAUSE_RESET = 0, 1


@dataclass(frozen=True)
class Harm:
    """Someone could have touched a charged part: when, what was on it, how it came about."""

    t_s: float
    volts: float
    stored_J: float
    why: str


@dataclass(frozen=True)
class Truth:
    """What is really so at this instant; for tests and nobody else. Volts, joules, coulombs."""

    t_s: float
    part_index: int  # into scenario.parts, 0 the first; -1 while nothing is fitted
    part_label: str
    part_V: float  # across the part's own plates, whatever its leads do
    node_V: float  # high node to ground
    low_V: float
    supply_V: float
    stored_J: float
    stored_C: float
    capacitance_F: float
    leakage_A: float  # conduction through the part alone, absorption left out
    lid_open: bool
    bolt_closed: bool
    harms: tuple[Harm, ...]  # every one since the start

    @property
    def hurt(self) -> bool:
        return bool(self.harms)


class World:
    """`World(scenario, seed)`; `seed` None takes the scenario's.

    Call `period` once every 5 ms of virtual time with what the controller put out; then read `inputs` and `codes`.
    """

    inputs: int
    """Raw levels after the period, bits as codes.json `inputs`."""
    codes: list[int]
    """Two codes: converter 0 and 1, of the conversions started at the beginning of the period; NO_CODE if silent or none."""
    now_us: int
    """Virtual time since power-up, microseconds; goes on through resets."""
    controller_hung: bool
    """While True the controller must not be stepped: call `period` with the outputs held, no pumps, no feeds, no conversions."""
    link_silent: bool
    """While True no byte passes either way."""
    unique_id: str
    """16 hex digits, from the seed."""
    calibration: dict[str, Any]
    """In the form the box keeps: drawn from the seed within its own stated uncertainty of the true errors."""
    truth: Truth

    def __init__(self, scenario: Scenario, seed: int | None = None) -> None:
        raise NotImplementedError

    def period(self, outputs: int, supply_mv: int, pumps: int, feeds: int, conv0: int, conv1: int) -> None:
        """Advance 5 ms. `outputs` bits as codes.json; `pumps`, `feeds`: how often the enable was toggled, the watchdog fed;
        `conv0`, `conv1`: channel * 2 + range of the conversion started on each converter, or NO_CONVERSION.

        `codes` then holds what those conversions give (mean over the chip's own 4 ms of this period).
        """
        raise NotImplementedError

    def clock_ms(self) -> int:
        """The controller's millisecond counter, 0..2**30-1; wraps; jumps if a fault makes it."""
        raise NotImplementedError

    def take_reset(self) -> int:
        """-1, or CAUSE_POWER / CAUSE_RESET once when the controller is to start anew now (watchdog, fault). The board drops
        RAM (and scratch after a power loss), and until the new controller puts something out, calls with outputs 0."""
        raise NotImplementedError

    def run_began(self) -> None:
        """The board tells that a run has begun (the marker is being kept), so that faults with `run` and `at_s` find it and
        the operator knows what the next release of the lock means. Without it a run is seen when the supply is first pumped."""
        raise NotImplementedError

    def snapshot(self) -> dict[str, Any]:
        """Everything that changes, JSON-able; `restore` on a World of the same scenario and seed goes on from there, same codes."""
        raise NotImplementedError

    def restore(self, kept: dict[str, Any]) -> None:
        raise NotImplementedError
