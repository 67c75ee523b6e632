"""What a piece of firmware would cost on the reference board, counted: byte codes and calls, no stop-watch.

The firmware runs in CPython, traced. Each of its byte codes and calls is counted at what MicroPython 1.28 takes for the like on a
Pico at 125 MHz; the figures come from a cycle model that read up to 12 % low against published ones of a real board, so 15 % is
added. They are averages, and CPython's byte codes are not quite MicroPython's: good to a quarter, which tells 1 ms from 5 ms.

    empty loop turn 3.1 us, `s += i` 4.6 us (four byte codes), function call 10 us, method call with an attribute `+=` 19 us
"""

from __future__ import annotations

import dis
import sys
from collections.abc import Callable
from types import CodeType, FrameType
from typing import Any

CODE_US = 1.15
CALL_US = 4.0  # beyond its byte codes
MARGIN = 1.15

# CPython's own, without a counterpart on the board.
_FREE = {
    "RESUME",
    "PRECALL",
    "PUSH_NULL",
    "CACHE",
    "NOP",
    "COPY_FREE_VARS",
    "EXTENDED_ARG",
    "KW_NAMES",
    "MAKE_CELL",
}


class Count:
    """Adds up the microseconds of the functions that `is_firmware` says are counted; `instead` prices calls as a whole."""

    def __init__(
        self, is_firmware: Callable[[CodeType], bool], instead: dict[str, Callable[[FrameType], float]]
    ) -> None:
        self._is_firmware = is_firmware
        self._instead = instead
        self.us = 0.0
        self.calls = 0

    def of(self, function: Callable[..., Any], *arguments: Any) -> float:
        """Run it; return its microseconds on the board, margin included."""
        self.us, self.calls = 0.0, 0
        sys.settrace(self._called)
        try:
            function(*arguments)
        finally:
            sys.settrace(None)
        return self.us * MARGIN

    def _called(self, frame: FrameType, event: str, argument: Any) -> Any:
        code = frame.f_code
        if code.co_name in self._instead:
            self.us += self._instead[code.co_name](frame)
            self.calls += 1
            return None
        if not self._is_firmware(code):
            return None
        frame.f_trace_opcodes = True
        frame.f_trace_lines = False
        self.us += CALL_US
        self.calls += 1
        return self._within

    def _within(self, frame: FrameType, event: str, argument: Any) -> Any:
        if event == "opcode" and dis.opname[frame.f_code.co_code[frame.f_lasti]] not in _FREE:
            self.us += CODE_US
        return self._within
