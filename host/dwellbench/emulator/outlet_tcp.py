"""The TCP port that an emulated box is served on: one client at a time, whoever else comes is told so and sent away."""

from __future__ import annotations

import contextlib
import errno
import json
import select
import socket
import time
import zlib

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.errors import UsageError

_CHUNK = 4096
_TOLD_ANYWAY_S = 0.5
_LET_GO_S = 2.0


def _busy_line() -> bytes:
    """What a second host is told. The box itself knows one host only."""
    error = {"code": -32010, "message": "Not in this state", "data": "another host is connected"}
    body = json.dumps({"jsonrpc": "2.0", "error": error, "id": None}, separators=(",", ":"))[:-1].encode()
    return body + b',"crc":"%08x"}\n' % zlib.crc32(body)


class _TurnedAway:
    """A client that came while there was another.

    It is told when it has said something, for a host may throw away what comes before that; and its socket stays open for a
    while, for one that is closed with bytes unread takes the words with it.
    """

    def __init__(self, client: socket.socket) -> None:
        self.client = client
        self._since = time.monotonic()
        self._told = False

    def serve(self, readable: bool) -> bool:
        """Say whether it is still there."""
        age_s = time.monotonic() - self._since
        try:
            gone = readable and not self.client.recv(_CHUNK)
            if not gone and not self._told and (readable or age_s > _TOLD_ANYWAY_S):
                self._told = True
                self.client.sendall(_busy_line())
                self.client.shutdown(socket.SHUT_WR)
        except OSError:
            gone = True
        if gone or age_s > _LET_GO_S:
            self.client.close()
            return False
        return True


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
        self._turned_away: list[_TurnedAway] = []
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
        reading = [self._listener, *(one.client for one in self._turned_away), *([client] if client else [])]
        writing = [client] if client and self._held else []
        readable, writable, _ = select.select(reading, writing, [], max(0.0, wait_s))
        if client is not None and (client in readable or client in writable):
            self._move(client, box, client in readable, client in writable)
        self._turned_away = [one for one in self._turned_away if one.serve(one.client in readable)]
        if self._listener in readable:
            self._accept(box)

    def _accept(self, box: EmulatedBox) -> None:
        """Take a new client, unless there is one that has not gone: whoever closes and comes back finds the place free."""
        with contextlib.suppress(OSError):
            new, _ = self._listener.accept()
            new.setblocking(False)
            while self._client is not None and self._move(self._client, box, True, False):
                pass
            if self._client is not None:
                self._turned_away.append(_TurnedAway(new))
                return
            new.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            self._client = new
            box.link.attach(True)

    def _move(self, client: socket.socket, box: EmulatedBox, readable: bool, writable: bool) -> bool:
        """Move bytes; say whether any came. A client that has gone is let go."""
        try:
            if writable:
                self._held = self._held[client.send(self._held) :]
            data = client.recv(_CHUNK) if readable else None
        except BlockingIOError:
            return False
        except OSError:
            data = b""
        if data:
            box.link.push(data)
        elif data == b"":
            client.close()
            self._client = None
            self._held = b""
            box.link.attach(False)
        return bool(data)

    def close(self) -> None:
        """Let the client go, give the port back."""
        for one in (self._client, *(away.client for away in self._turned_away), self._listener):
            if one is not None:
                one.close()
