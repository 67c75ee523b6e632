"""An emulated box for other processes: on a pseudo-terminal or a TCP port, in real time or a multiple of it.

One loop: bytes in, as many periods as the clock asks for, bytes out. The world never waits for a reader; as on the board, a link
that nobody reads fills its buffer and stalls there. One client at a time; a second one is told so and sent away.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Protocol

from dwellbench.emulator.emulated_box import EmulatedBox

_PERIOD_S = 0.005
_BEHIND_S = 0.25  # further behind than this (a slow or suspended computer) and the world is not caught up


class Outlet(Protocol):
    """Where the bytes go."""

    @property
    def held(self) -> bool:
        """Bytes that the reader has not made room for yet."""

    def exchange(self, box: EmulatedBox, wait_s: float) -> None:
        """Wait up to `wait_s` for bytes or room, and move what can be moved."""

    def close(self) -> None:
        """Leave nothing behind."""


def serve(
    box: EmulatedBox,
    outlet: Outlet,
    speed: float,
    stop: Callable[[], bool] = lambda: False,
    on_end: Callable[[], None] = lambda: None,
) -> None:
    """Run the box until `stop()` says so or the user interrupts. `speed` 1 is real time; `on_end` may keep its state."""
    start = time.monotonic()
    base_s = box.now_s
    try:
        while not stop():
            due_s = base_s + (time.monotonic() - start) * speed
            if due_s - box.now_s > _BEHIND_S * max(1.0, speed):
                start, base_s = time.monotonic(), box.now_s
                due_s = base_s
            periods = 0
            while box.now_s < due_s and periods < 20:
                box.tick()
                periods += 1
                if len(box.link.out) >= 128 and not outlet.held:
                    break
            ahead_s = (box.now_s + _PERIOD_S - due_s) / speed
            outlet.exchange(box, min(ahead_s, 0.05) if box.now_s >= due_s else 0.0)
    except KeyboardInterrupt:
        pass
    finally:
        outlet.close()
        try:
            on_end()
        finally:
            box.stop()
