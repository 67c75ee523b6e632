"""Relays: a coil's change becomes contacts that travel, touch and bounce, each at its own microsecond.

A changeover contact rests, travels (touching neither side), then works; coming down, the reverse. Where it
arrives it may bounce one to three times. From the coil's change to the last touch never takes more than
the reference box's 10 ms.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from dwellbench.emulator.dice import Dice
from dwellbench.emulator.front_end import Errors
from dwellbench.emulator.reference import box

REST, TRAVEL, WORK = 0, 1, 2
BLEED, CHARGE, MID, LOW = 0, 1, 2, 3
"""Which relay: first bleed, charge changeover, 100 kohm shunt, 560 ohm shunt."""
NAMES = ("bleed", "charge", "mid", "low")


@dataclass
class Event:
    """At `at_us` relay `which` has its contact at `position`."""

    at_us: int
    which: int
    position: int


class Relays:
    """The four relays of the box. `position` is where each contact is; `due` the events still to come, in
    order of time."""

    def __init__(self, errors: Errors, dice: Dice) -> None:
        self._operate_us, self._release_us = errors.operate_ms * 1e3, errors.release_ms * 1e3
        self._bounce_us = errors.bounce_ms * 1e3
        self._dice = dice
        self.coil = [False] * 4
        self.position = [REST] * 4
        self.due: list[Event] = []
        self.welded: dict[int, int] = {}  # relay: the side it stays on once it is there
        self.stuck: set[int] = set()  # relays whose contact does not move at all

    def drive(self, which: int, on: bool, now_us: int) -> None:
        """Give or take the coil's current."""
        if self.coil[which] == on:
            return
        self.coil[which] = on
        self.due = [event for event in self.due if event.which != which]
        self.due += self._travel(which, WORK if on else REST, now_us)
        self.due.sort(key=lambda event: event.at_us)

    def _travel(self, which: int, goal: int, now_us: int) -> list[Event]:
        """The contact's way to `goal`: lets go early, touches at the relay's time, bounces, stays."""
        touch = (self._operate_us if goal == WORK else self._release_us) * self._dice.uniform(0.95, 1.05)
        leave = touch * self._dice.uniform(0.4, 0.8)
        touch = min(touch, box().relay_s * 1e6 - self._bounce_us)
        events = [Event(now_us + int(leave), which, TRAVEL), Event(now_us + int(touch), which, goal)]
        at = touch
        end = touch + self._bounce_us * self._dice.uniform(0.3, 1.0)
        for _ in range(int(self._dice.uniform(0.0, 4.0))):
            open_at = at + self._dice.uniform(50.0, 400.0)
            close_at = open_at + self._dice.uniform(50.0, 300.0)
            if close_at > end:
                break
            events += [
                Event(now_us + int(open_at), which, TRAVEL),
                Event(now_us + int(close_at), which, goal),
            ]
            at = close_at
        return events

    def move(self, event: Event) -> bool:
        """Let the contact move as it should at this event; False if it does not."""
        which = event.which
        if which in self.stuck or self.position[which] == event.position:
            return False
        if self.welded.get(which) == self.position[which]:
            return False
        self.position[which] = event.position
        return True

    def settle(self, which: int) -> None:
        """Put the contact where its coil wants it (a fault has ended), unless it is on its way."""
        if not any(event.which == which for event in self.due):
            self.position[which] = WORK if self.coil[which] else REST

    def state(self) -> dict[str, Any]:
        """JSON-able."""
        due = [[event.at_us, event.which, event.position] for event in self.due]
        return {
            "coil": list(self.coil),
            "position": list(self.position),
            "due": due,
            "dice": self._dice.state,
            "welded": sorted(self.welded.items()),
            "stuck": sorted(self.stuck),
        }

    def load(self, kept: dict[str, Any]) -> None:
        """Take up what `state` gave."""
        self.coil, self.position = list(kept["coil"]), list(kept["position"])
        self.due = [Event(*row) for row in kept["due"]]
        self._dice.state = kept["dice"]
        self.welded, self.stuck = dict(kept["welded"]), set(kept["stuck"])
