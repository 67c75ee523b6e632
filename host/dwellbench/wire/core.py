"""The client's side of the wire without any I/O: requests to bytes, bytes to events.

    client = Client()
    data, id_ = client.request("hello")     # write `data` to the link
    events = client.receive(b"...")         # Answer, Refusal, Notice or Junk, in the order of the lines

A line is bounded, its checksum and schema are checked before anything is believed, and what fails is an event of its own rather
than an exception: a link may always carry rubbish.
"""

from __future__ import annotations

import json
import zlib
from dataclasses import dataclass
from typing import Any

from dwellbench.wire import schemas
from dwellbench.wire.codes import MAJOR, error_id

LINE_BYTES = 512
_CRC_HEAD = b',"crc":'
_ID_WRAP = 1 << 30


@dataclass(frozen=True)
class Answer:
    """The result of a request."""

    id: int | str
    method: str
    result: dict[str, Any]


@dataclass(frozen=True)
class Refusal:
    """The error that answers a request; `id` None when the box could not tell which."""

    id: int | str | None
    code: int
    message: str
    data: Any

    @property
    def name(self) -> str:
        """The error's id in codes.json."""
        return error_id(self.code)


@dataclass(frozen=True)
class Notice:
    """A notification: state, samples, fault, done or log."""

    method: str
    params: dict[str, Any]

    @property
    def n(self) -> int:
        """The event's number since the box's start."""
        return int(self.params["n"])


@dataclass(frozen=True)
class Junk:
    """A line that is not what the wire allows, and why."""

    line: bytes
    why: str


Event = Answer | Refusal | Notice | Junk


def seal(message: dict[str, Any]) -> bytes:
    """Return the line of a message: compact JSON, the checksum last, a newline."""
    body = json.dumps(message, separators=(",", ":"), ensure_ascii=False).encode()[:-1]
    return body + b',"crc":"%08x"}\n' % zlib.crc32(body)


def unseal(line: bytes) -> dict[str, Any]:
    """Return the message of a line (without its newline). ValueError says what is wrong with it."""
    body, head, tail = line.rpartition(_CRC_HEAD)
    if not head:
        raise ValueError("no checksum")
    if tail != b'"%08x"}' % zlib.crc32(body):
        raise ValueError("wrong checksum")
    message = json.loads(line)
    if not isinstance(message, dict):
        raise ValueError("not an object")
    return message


class Client:
    """One conversation. Holds what has come of a line, and which requests are unanswered."""

    def __init__(self) -> None:
        self._partial = bytearray()
        self._overlong = False
        self._next_id = 1
        self._asked: dict[int | str, str] = {}

    def request(self, method: str, params: dict[str, Any] | None = None) -> tuple[bytes, int]:
        """Return the bytes of a request and its id. WrongMessage if the schema does not allow it."""
        id_ = self._next_id
        self._next_id = (id_ + 1) % _ID_WRAP
        message = {"jsonrpc": "2.0", "id": id_, "method": method, "params": params or {}}
        schemas.check(f"request.{method}", message)
        self._asked[id_] = method
        return seal(message), id_

    def notify(self, method: str) -> bytes:
        """Return the bytes of a request that wants no answer. WrongMessage if the schema does not allow it."""
        message = {"jsonrpc": "2.0", "method": method, "params": {}}
        schemas.check(f"request.{method}", message)
        return seal(message)

    def sent(self, line: bytes) -> None:
        """A request as it stands in a log: its answer will be known. ValueError for a line that is none."""
        message = unseal(line)
        if "id" in message:
            self._asked[message["id"]] = str(message["method"])

    def forget(self) -> None:
        """The link was lost: what was under way is gone."""
        self._partial.clear()
        self._overlong = False
        self._asked.clear()

    def receive(self, data: bytes) -> list[Event]:
        """Take bytes; return the events of the lines that are whole."""
        events: list[Event] = []
        *whole, rest = (bytes(self._partial) + data).split(b"\n")
        for line in whole:
            if self._overlong:
                self._overlong = False
                events.append(Junk(line[:80], "the line is too long"))
            elif line.strip():
                events.append(self._line(line.rstrip(b"\r")))
        self._partial[:] = rest
        if len(rest) > LINE_BYTES:
            self._overlong = True
            self._partial.clear()
        return events

    def _line(self, line: bytes) -> Event:
        if len(line) >= LINE_BYTES:
            return Junk(line[:80], "the line is too long")
        try:
            return self._event(unseal(line))
        except ValueError as error:  # also what is not JSON, and what its schema does not allow
            return Junk(line, str(error))

    def _event(self, message: dict[str, Any]) -> Event:
        if "method" in message:
            method = str(message["method"])
            schemas.check(f"event.{method}", message)
            return Notice(method, message["params"])
        if "error" in message:
            schemas.check("error", message)
            error = message["error"]
            if message["id"] is not None:
                self._was_asked(message["id"])
            return Refusal(message["id"], error["code"], error["message"], error.get("data"))
        id_: int | str = message.get("id", "")
        asked = self._was_asked(id_)
        if not (asked == "hello" and _other_major(message)):
            schemas.check(f"result.{asked}", message)
        return Answer(id_, asked, message["result"])

    def _was_asked(self, id_: int | str) -> str:
        """Return the method that the answer belongs to, which is answered by that."""
        asked = self._asked.pop(id_, None) if isinstance(id_, (int, str)) else None
        if asked is None:
            raise schemas.WrongMessage("an answer to nothing that was asked")
        return asked


def _other_major(message: dict[str, Any]) -> bool:
    """Say whether a hello names another major version: then nothing else of it need be as we know it."""
    result = message.get("result")
    version = result.get("protocol") if isinstance(result, dict) else None
    return isinstance(version, list) and bool(version) and isinstance(version[0], int) and version[0] != MAJOR
