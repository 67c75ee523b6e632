"""An emulated box for other processes: on a pseudo-terminal or a TCP port, in real time or a multiple of it.

One loop: bytes in, as many periods as the clock asks for, bytes out. The world never waits for a reader; as on the board, a link
that nobody reads fills its buffer and stalls there. One client at a time; a second one is told so and sent away.
"""

from __future__ import annotations

import contextlib
import errno
import json
import os
import select
import socket
import time
import zlib
from collections import deque
from collections.abc import Callable
from pathlib import Path
from typing import Protocol

try:
    import tty
except ImportError:  # Windows
    tty = None  # type: ignore[assignment]

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.errors import UsageError

_PERIOD_S = 0.005
_BEHIND_S = 0.25  # further behind than this (a slow or suspended computer) and the world is not caught up
_CHUNK = 4096
_GIVEN_UP = 8  # clients sent away whose farewell is still on its way


def _busy_line() -> bytes:
    """What a second host is told. The box itself knows one host only."""
    error = {"code": -32010, "message": "Not in this state", "data": "another host is connected"}
    body = json.dumps({"jsonrpc": "2.0", "error": error, "id": None}, separators=(",", ":"))[:-1].encode()
    return body + b',"crc":"%08x"}\n' % zlib.crc32(body)


class Outlet(Protocol):
    """Where the bytes go."""

    @property
    def held(self) -> bool:
        """Bytes that the reader has not made room for yet."""

    def exchange(self, box: EmulatedBox, wait_s: float) -> None:
        """Wait up to `wait_s` for bytes or room, and move what can be moved."""

    def close(self) -> None:
        """Leave nothing behind."""


class Pty:
    """A pseudo-terminal under a symbolic link of the user's choice."""

    def __init__(self, link: Path) -> None:
        if not hasattr(os, "openpty") or tty is None:
            raise UsageError("This computer has no pseudo-terminals.", remedy="Use --tcp.")
        if link.is_symlink() and not link.exists():
            link.unlink()  # left behind by a process that was killed
        if link.exists() or link.is_symlink():
            raise UsageError(
                f"{link} exists already.",
                remedy="Choose another name, or remove it if no emulator serves it.",
            )
        self._master, self._slave = os.openpty()  # the slave stays open, so that a host may come and go
        tty.setraw(self._slave)
        os.set_blocking(self._master, False)
        self.name = os.ttyname(self._slave)
        self._link = link
        self._held = b""
        try:
            link.symlink_to(self.name)
        except OSError as error:
            self._release()
            raise UsageError(
                f"{link} cannot be made: {error.strerror}.",
                remedy="Choose a folder you may write to.",
            ) from None

    @property
    def held(self) -> bool:
        """Bytes that the reader has not made room for yet."""
        return bool(self._held)

    def exchange(self, box: EmulatedBox, wait_s: float) -> None:
        """Nobody knows whether a host has the slave open, so one is taken to be there."""
        if not box.link.attached:
            box.link.attach(True)
        self._held = self._held or box.link.pull(_CHUNK)
        writing = [self._master] if self._held else []
        readable, writable, _ = select.select([self._master], writing, [], max(0.0, wait_s))
        if writable:
            with contextlib.suppress(BlockingIOError):
                self._held = self._held[os.write(self._master, self._held) :]
        if readable:
            with contextlib.suppress(BlockingIOError):
                box.link.push(os.read(self._master, _CHUNK))

    def close(self) -> None:
        """Remove the link, if it is still ours."""
        with contextlib.suppress(OSError):
            if os.readlink(self._link) == self.name:
                self._link.unlink()
        self._release()

    def _release(self) -> None:
        os.close(self._master)
        os.close(self._slave)


class Tcp:
    """A listening port; `socket://HOST:PORT` on the other side."""

    def __init__(self, host: str, port: int) -> None:
        try:
            self._listener = socket.create_server((host, port))
        except OSError as error:
            busy = error.errno == errno.EADDRINUSE
            why = "is in use by another program" if busy else f"cannot be opened: {error.strerror or error}"
            raise UsageError(
                f"{host}:{port} {why}.", remedy="Choose another port; 0 takes a free one."
            ) from None
        self._listener.setblocking(False)
        address = self._listener.getsockname()
        self.name = f"socket://{address[0]}:{address[1]}"
        self._client: socket.socket | None = None
        self._sent_away: deque[socket.socket] = deque()
        self._held = b""

    @property
    def held(self) -> bool:
        """Bytes that the client has not made room for yet."""
        return bool(self._held)

    def exchange(self, box: EmulatedBox, wait_s: float) -> None:
        """Take a client, move its bytes, notice that it has gone."""
        client = self._client
        if client is not None:
            self._held = self._held or box.link.pull(_CHUNK)
        reading = [self._listener] + ([client] if client else [])
        writing = [client] if client and self._held else []
        readable, writable, _ = select.select(reading, writing, [], max(0.0, wait_s))
        if self._listener in readable:
            self._accept(box)
        if client is not None and (client in readable or client in writable):
            self._move(client, box, client in readable, client in writable)

    def _accept(self, box: EmulatedBox) -> None:
        with contextlib.suppress(OSError):
            new, _ = self._listener.accept()
            if self._client is not None:
                self._send_away(new)
                return
            new.setblocking(False)
            new.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            self._client = new
            box.link.attach(True)

    def _send_away(self, new: socket.socket) -> None:
        """Tell it, and leave the socket open for a while: closed with its bytes unread it would lose the words too."""
        self._sent_away.append(new)
        if len(self._sent_away) > _GIVEN_UP:
            self._sent_away.popleft().close()
        new.sendall(_busy_line())
        new.shutdown(socket.SHUT_WR)

    def _move(self, client: socket.socket, box: EmulatedBox, readable: bool, writable: bool) -> None:
        try:
            if writable:
                self._held = self._held[client.send(self._held) :]
            data = client.recv(_CHUNK) if readable else None
        except BlockingIOError:
            return
        except OSError:
            data = b""
        if data:
            box.link.push(data)
        elif data == b"":
            client.close()
            self._client = None
            self._held = b""
            box.link.attach(False)

    def close(self) -> None:
        """Let the client go, give the port back."""
        for one in (self._client, *self._sent_away, self._listener):
            if one is not None:
                one.close()


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
