"""Ctrl-C held back for a moment, for what must be whole.

Python may raise KeyboardInterrupt between any two steps. In the middle of an emulated period it would tear world and firmware
apart; between taking an event and keeping it, the event would be lost. Inside `with held():` the interrupt waits for the end of
the block. Blocks are short: one event, one wait of virtual time.
"""

from __future__ import annotations

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType


@contextmanager
def held() -> Iterator[None]:
    """Put off SIGINT to the end of the block. Without effect outside the main thread, where it never arrives."""
    before = signal.getsignal(signal.SIGINT)
    if not callable(before) or threading.current_thread() is not threading.main_thread():
        yield
        return
    came: list[tuple[int, FrameType | None]] = []
    signal.signal(signal.SIGINT, lambda number, frame: came.append((number, frame)))
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
        if came:
            before(*came[0])
