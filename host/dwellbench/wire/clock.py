"""The link's own clock: all waiting goes through it.

Two seconds of silence must mean the same to both ends. An emulated box in this process lives in virtual time, and only waiting
lets it pass; one that is served ten times faster than life has ten of its seconds in one of ours; a real box has the wall's.
"""

from __future__ import annotations

import time
from typing import Any, Protocol

# However fast the box's time goes, the two processes need this much of the wall's to be given their turn by the computer.
TURN_S = 0.5


class Clock(Protocol):
    """Seconds that never jump, and how to wait in them."""

    virtual: bool

    def now(self) -> float:
        """Seconds since some start."""

    def rescale(self, scale: float) -> None:
        """From now on `scale` of these seconds pass in one of the wall's."""

    def port_timeout(self, seconds: float) -> float:
        """What a port must be told, so that it waits this long."""

    def patience(self, seconds: float) -> float:
        """How long to wait for an answer that takes the box `seconds` at most."""

    def pause(self, seconds: float) -> None:
        """Let time pass."""


class WallClock:
    """The wall's seconds times a scale, from 0."""

    virtual = False

    def __init__(self) -> None:
        self._scale = 1.0
        self._base_s = 0.0
        self._since = time.monotonic()

    def now(self) -> float:
        """Seconds since this clock was made."""
        return self._base_s + (time.monotonic() - self._since) * self._scale

    def rescale(self, scale: float) -> None:
        """Go on from the present time at another pace."""
        self._base_s, self._since = self.now(), time.monotonic()
        self._scale = scale

    def port_timeout(self, seconds: float) -> float:
        """The wall's seconds."""
        return seconds / self._scale

    def patience(self, seconds: float) -> float:
        """At least a turn of the wall's time."""
        return max(seconds, TURN_S * self._scale)

    def pause(self, seconds: float) -> None:
        """Sleep."""
        time.sleep(seconds / self._scale)


class PortClock:
    """The virtual seconds of a port that has them: `port.clock()`, `port.wait(seconds)`."""

    virtual = True

    def __init__(self, port: Any) -> None:
        self._port = port

    def now(self) -> float:
        """Virtual seconds."""
        return float(self._port.clock())

    def rescale(self, scale: float) -> None:
        """Virtual time has no pace."""

    def port_timeout(self, seconds: float) -> float:
        """The port counts the same seconds."""
        return seconds

    def patience(self, seconds: float) -> float:
        """Nobody else needs a turn."""
        return seconds

    def pause(self, seconds: float) -> None:
        """Let the emulated world go on."""
        self._port.wait(seconds)
