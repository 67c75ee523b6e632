"""A conversation with one box: ask and be answered, events in order, and the link taken up again when it is lost.

All waiting goes through the link's own clock, so that an emulated box in this process runs as fast as it can; only the pause
between two tries to open a lost link is of the wall's.
"""

from __future__ import annotations

import time
from collections import deque
from types import TracebackType
from typing import Any, Self

from dwellbench.errors import LinkError, NoBoxError, WrongBoxError
from dwellbench.wire.codes import MAJOR
from dwellbench.wire.core import Answer, Client, Junk, Notice, Refusal
from dwellbench.wire.link import Link, open_link
from dwellbench.wire.said import refused
from dwellbench.wire.stream import Stream
from dwellbench.wire.wire_log import WireLog

ANSWER_S = 1.0  # the box answers within a few periods; a second covers a busy USB host
TRIES = 3
HELLO_S = 3.0
FETCHES = 5  # times the same event is asked for
KEEPALIVE_S = 0.5  # a quarter of the silence that ends a run
RECONNECT_S = (
    30.0  # what the box recorded stays for two minutes; half a minute of trying, then the user is told
)
RETRY_S = 0.25


class Conversation:
    """An open link and what passes over it. `hello` is the box's own answer to it."""

    def __init__(self, url: str, *, wire_log: WireLog | None = None, link: Link | None = None) -> None:
        self.url = url
        self._log = wire_log
        self._link = link or open_link(url, wire_log)
        self._client = Client()
        self._answers: dict[int | str, Answer | Refusal] = {}
        self._waiting: deque[Notice] = deque()
        self._stream = Stream(0)
        self._fetching: tuple[int | str, float] | None = None
        self._fetched = -1
        self._fetches = 0
        self._sent_s = -1e9
        self.keepalive = False
        self.restarted = False
        self.junk = 0
        self.hello: dict[str, Any] = {}
        try:
            self.hello = self._introduce()
        except BaseException:
            self.close()
            raise

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Let the link go. The box itself goes on guarding."""
        self._link.close()
        if self._log is not None:
            self._log.close()

    def clock(self) -> float:
        """Seconds of the link's own clock."""
        return self._link.clock()

    def rest(self, seconds: float) -> None:
        """Let time pass on the link's clock, taking what comes."""
        until = self.clock() + seconds
        while (left := until - self.clock()) > 0:
            self._receive(left)

    # -- connecting

    def _introduce(self) -> dict[str, Any]:
        """Say hello until something answers that is a box of our major version."""
        self._write(b"\n")  # ends whatever half line an earlier host left
        heard = self.junk
        until = self.clock() + HELLO_S
        while self.clock() < until:
            answer = self._try("hello", {})
            if isinstance(answer, Answer):
                return self._accept(answer.result)
            if isinstance(answer, Refusal):
                break
        if self.junk > heard or isinstance(answer, Refusal):
            raise WrongBoxError(
                f"What answers at {self.url} is not a dwellbench box.",
                remedy="Choose another port with --box; load the firmware if it is a bare board.",
            )
        raise NoBoxError(
            f"Nothing answers at {self.url}.", remedy="Is the box switched on, and is this its port?"
        )

    def _accept(self, hello: dict[str, Any]) -> dict[str, Any]:
        major = hello["protocol"][0]
        if major != MAJOR:
            raise WrongBoxError(
                f"The box speaks version {major} of the wire, this host version {MAJOR}.",
                remedy="Use host and firmware of the same major version.",
            )
        scale = hello.get("time_scale")
        if scale not in (None, "virtual"):
            self._link.scale = float(scale)
        self._stream = Stream(hello["n"])
        return hello

    # -- asking

    def ask(self, method: str, params: dict[str, Any] | None = None) -> dict[str, Any]:
        """Ask, try again if no answer comes, and return the result. Raises RefusedError, FaultError or LinkError."""
        for _ in range(TRIES):
            answer = self._try(method, params or {})
            if isinstance(answer, Answer):
                return answer.result
            if isinstance(answer, Refusal) and answer.id is not None:
                raise refused(answer)
        raise LinkError(
            f"The box at {self.url} does not answer {method!r}.", remedy="Check the cable, then try again."
        )

    def _try(self, method: str, params: dict[str, Any]) -> Answer | Refusal | None:
        data, id_ = self._client.request(method, params)
        self._write(data)
        until = self.clock() + ANSWER_S
        while id_ not in self._answers and self.clock() < until:
            self._receive(until - self.clock())
        return self._answers.pop(id_, None)

    def next_event(self, timeout_s: float) -> Notice | None:
        """The next event in order, or None when none comes in time."""
        until = self.clock() + timeout_s
        while not self._waiting:
            left = until - self.clock()
            if left <= 0:
                return None
            self._receive(left)
        return self._waiting.popleft()

    def expect(self, n: int) -> None:
        """The box says that its next event will be `n`; what is missing before it is fetched."""
        self._stream.expect(n)
        self._fetch()

    @property
    def lost(self) -> int:
        """Events that the box no longer kept when they were asked for."""
        return self._stream.lost

    # -- bytes

    def _write(self, data: bytes) -> None:
        try:
            self._link.write(data)
        except LinkError:
            self._reconnect()
            return
        self._sent_s = self.clock()

    def _receive(self, timeout_s: float) -> None:
        """Take what comes within the time, send a sign of life when one is due, ask for what is missing."""
        if self.keepalive:
            due = self._sent_s + KEEPALIVE_S - self.clock()
            if due <= 0:
                self._write(self._client.notify("keepalive"))
                due = KEEPALIVE_S
            timeout_s = min(timeout_s, due)
        try:
            data = self._link.read(max(timeout_s, 0.0))
        except LinkError:
            self._reconnect()
            return
        for event in self._client.receive(data):
            self._take(event)
        self._fetch()

    def _take(self, event: Answer | Refusal | Notice | Junk) -> None:
        if isinstance(event, Notice):
            self._notice(event)
        elif isinstance(event, Junk):
            self.junk += 1
        elif self._fetching is not None and event.id == self._fetching[0]:
            self._fetching = (event.id, self.clock() + ANSWER_S)
            if isinstance(event, Answer):
                self._waiting.extend(self._stream.oldest_is(event.result["from"]))
        elif event.id is not None:
            self._answers[event.id] = event
        elif isinstance(event, Refusal) and event.data == "another host is connected":
            raise NoBoxError(
                f"{self.url} is in use by another program.",
                remedy="Close the other program; one host drives a box at a time.",
            )

    def _notice(self, notice: Notice) -> None:
        if notice.params["boot"] != self.hello.get("boot"):
            self.restarted = True
            return
        self._waiting.extend(self._stream.take(notice))

    def _fetch(self) -> None:
        """Ask for the first gap, once at a time, again if it is not filled in a second."""
        gap = self._stream.missing()
        if gap is None:
            self._fetching = None
            self._fetches = 0
            return
        if self._fetching is not None and self.clock() < self._fetching[1]:
            return
        self._fetches = self._fetches + 1 if gap[0] == self._fetched else 1
        self._fetched = gap[0]
        if self._fetches > FETCHES:  # it comes, and never as the schema has it: one event is lost, the rest is not
            self._waiting.extend(self._stream.oldest_is(gap[0] + 1))
            self._fetching = None
            return
        data, id_ = self._client.request("samples", {"from": gap[0], "count": gap[1]})
        self._fetching = (id_, self.clock() + ANSWER_S)
        self._write(data)

    # -- a lost link

    def _reconnect(self) -> None:
        """Try again, at first quickly, for half a minute; then say hello and fetch what was missed."""
        self._link.close()
        self._client.forget()
        self._fetching = None
        keepalive, self.keepalive = self.keepalive, False
        start = self._wall()
        while True:
            try:
                self._link = self._reopened()
                break
            except (LinkError, WrongBoxError) as error:
                if self._wall() - start > RECONNECT_S:
                    raise LinkError(
                        f"The link to {self.url} is lost.",
                        remedy="The box discharges the part by itself. Connect again; it keeps the last two minutes.",
                    ) from error
                self._pause(RETRY_S)
        self.keepalive = keepalive

    def _reopened(self) -> Link:
        """Open the link anew and make sure that it is the same box."""
        link = open_link(self.url, self._log)
        link.scale = self._link.scale
        data, id_ = self._client.request("hello", {})
        link.write(b"\n" + data)
        until = link.clock() + ANSWER_S
        while link.clock() < until:
            for event in self._client.receive(link.read(until - link.clock())):
                if isinstance(event, Answer) and event.id == id_:
                    return self._same(link, event.result)
                if isinstance(event, Notice):
                    self._notice(event)
        link.close()
        raise NoBoxError(f"Nothing answers at {self.url}.", remedy="Is the box switched on?")

    def _same(self, link: Link, hello: dict[str, Any]) -> Link:
        if hello["box"] != self.hello["box"]:
            link.close()
            raise WrongBoxError(
                f"Another box is at {self.url} now.", remedy="Connect the box that the run began on."
            )
        if hello["boot"] != self.hello["boot"]:
            self.restarted = True
            self.hello = hello
            self._stream = Stream(hello["n"])
        elif hello["n"] > self._stream.next_n:
            self._stream.expect(hello["n"])
        return link

    def _wall(self) -> float:
        return time.monotonic()

    def _pause(self, seconds: float) -> None:
        time.sleep(seconds)
