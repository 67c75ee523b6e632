"""A conversation with one box: ask and be answered, events in order, and the link taken up again when it is lost.

All waiting goes through the link's own clock, so that an emulated box in this process runs as fast as it can.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from types import TracebackType
from typing import Any, Self

from dwellbench.errors import LinkError, NoBoxError, WrongBoxError
from dwellbench.wire.codes import MAJOR
from dwellbench.wire.core import Answer, Client, Junk, Notice, Refusal
from dwellbench.wire.held import held
from dwellbench.wire.inbox import Inbox
from dwellbench.wire.link import Link, open_link
from dwellbench.wire.said import refused
from dwellbench.wire.wire_log import WireLog

ANSWER_S = 1.5  # half a second for a long line in, as much for the lines before the answer, and a busy host
TRIES = 3
HELLO_S = 3.0
KEEPALIVE_S = 0.5  # a quarter of the silence that ends a run
HURRY_S = 1.5  # a link back within this finds the run still under way: the box waits 2 s
HURRY_RETRY_S = 0.05
RETRY_S = 0.25
RECONNECT_S = (
    30.0  # what the box recorded stays for two minutes; half a minute of trying, then the user is told
)

Reopen = Callable[[], Link]


class Conversation:
    """An open link and what passes over it. `hello` is the box's own answer to it.

    `link` and `reopen` replace how the link is made, at first and after it was lost. Without `reopen`, a box that is emulated in
    this process is not opened again: that would be another box.
    """

    def __init__(
        self,
        url: str,
        *,
        wire_log: WireLog | None = None,
        link: Link | None = None,
        reopen: Reopen | None = None,
    ) -> None:
        self.url = url
        self._log = wire_log
        self._link = link or open_link(url, wire_log)
        self._reopen = reopen
        self._client = Client()
        self._inbox = Inbox()
        self._wanted: int | None = None
        self._answer: Answer | Refusal | None = None
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
        return self._link.clock.now()

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
        answer = None
        while answer is None and self.clock() < until:
            answer = self._try("hello", {})
        if isinstance(answer, Answer):
            return self._accept(answer.result)
        if self.junk > heard or isinstance(answer, Refusal):
            raise WrongBoxError(
                f"What answers at {self.url} is not a dwellbench box.",
                remedy="Choose another port with --box; load the firmware if it is a bare board.",
            )
        raise NoBoxError(
            f"Nothing answers at {self.url}.", remedy="Is the box switched on, and is this its port?"
        )

    def _accept(self, hello: dict[str, Any]) -> dict[str, Any]:
        _refuse_other_major(hello)
        self._link.clock.rescale(_scale(hello))
        self._inbox.begin_at(hello["n"])
        return hello

    def know_again(self) -> None:
        """After the box was restarted: say hello anew, and go on with what it is now."""
        if self.restarted:
            self.hello = self._introduce()
            self.restarted = False

    # -- asking

    def ask(self, method: str, params: dict[str, Any] | None = None) -> dict[str, Any]:
        """Ask, try again if no answer comes, and return the result. Raises RefusedError, FaultError or LinkError."""
        for _ in range(TRIES):
            answer = self._try(method, params or {})
            if isinstance(answer, Answer):
                return answer.result
            if isinstance(answer, Refusal):
                raise refused(answer)
        raise LinkError(
            f"The box at {self.url} does not answer {method!r}.", remedy="Check the cable, then try again."
        )

    def _try(self, method: str, params: dict[str, Any]) -> Answer | Refusal | None:
        data, self._wanted = self._client.request(method, params)
        self._answer = None
        self._write(data)
        until = self.clock() + self._link.clock.patience(ANSWER_S)
        while self._answer is None and self.clock() < until:
            self._receive(until - self.clock())
        return self._answer

    def next_event(self, timeout_s: float, take: Callable[[Notice], object]) -> bool:
        """Hand the next event in order to `take`; return False when none comes in time. No interrupt comes between."""
        until = self.clock() + timeout_s
        while not self._inbox.ready:
            left = until - self.clock()
            if left <= 0:
                return False
            self._receive(left)
        with held():
            take(self._inbox.ready.popleft())
        return True

    def expect(self, n: int) -> None:
        """The box says that its next event will be `n`; what is missing before it is fetched."""
        self._inbox.expect(n)
        self._fetch()

    @property
    def lost(self) -> int:
        """Events that the box no longer kept when they were asked for."""
        return self._inbox.lost

    # -- bytes

    def _write(self, data: bytes) -> None:
        try:
            self._link.write(data)
        except LinkError as error:
            self._reconnect(error)
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
        except LinkError as error:
            self._reconnect(error)
            return
        with held():
            for event in self._client.receive(data):
                self._take(event)
        self._fetch()

    def _take(self, event: Answer | Refusal | Notice | Junk) -> None:
        if isinstance(event, Notice):
            self._notice(event)
        elif isinstance(event, Junk):
            self.junk += 1
        elif self._inbox.answer(event, self.clock()):
            pass
        elif event.id is not None and event.id == self._wanted:
            self._answer = event
        elif isinstance(event, Refusal) and event.data == "another host is connected":
            raise NoBoxError(
                f"{self.url} is in use by another program.",
                remedy="Close the other program; one host drives a box at a time.",
            )

    def _notice(self, notice: Notice) -> None:
        if not self.hello:
            return  # of a time before we were introduced
        if notice.params["boot"] != self.hello["boot"]:
            self.restarted = True
            return
        self._inbox.take(notice)

    def _fetch(self) -> None:
        """Ask for the first gap."""
        gap = self._inbox.due(self.clock())
        if gap is not None:
            data, id_ = self._client.request("samples", {"from": gap[0], "count": gap[1]})
            self._inbox.asked(id_, gap, self.clock())
            self._write(data)

    # -- a lost link

    def _reconnect(self, broke: LinkError) -> None:
        """Try again, at first quickly, for half a minute; the new link says hello, and what was missed is asked for."""
        old = self._link
        old.close()
        if not self.hello or (old.clock.virtual and self._reopen is None):
            raise broke
        self._client.forget()
        self._inbox.cut()
        start = self.clock()
        while True:
            try:
                self._link = self._reopened(old)
                return
            except LinkError as error:
                gone_s = old.clock.now() - start
                if gone_s > RECONNECT_S:
                    raise error if isinstance(error, WrongBoxError) else _lost(self.url) from error
                old.pause(HURRY_RETRY_S if gone_s < HURRY_S else RETRY_S)

    def _reopened(self, old: Link) -> Link:
        """Open the link anew and make sure that it is the same box."""
        link = self._reopen() if self._reopen else open_link(self.url, self._log, old.clock)
        try:
            self._same(self._greeted(link))
        except BaseException:
            link.close()
            raise
        self._sent_s = link.clock.now()
        return link

    def _greeted(self, link: Link) -> dict[str, Any]:
        data, id_ = self._client.request("hello", {})
        link.write(b"\n" + data)
        until = link.clock.now() + link.clock.patience(ANSWER_S)
        while (left := until - link.clock.now()) > 0:
            for event in self._client.receive(link.read(left)):
                if isinstance(event, Answer) and event.id == id_:
                    return event.result
                if isinstance(event, Notice):
                    self._notice(event)
        raise NoBoxError(f"Nothing answers at {self.url}.", remedy="Is the box switched on?")

    def _same(self, hello: dict[str, Any]) -> None:
        _refuse_other_major(hello)
        if hello["box"] != self.hello["box"]:
            raise WrongBoxError(
                f"Another box is at {self.url} now.", remedy="Connect the box that the run began on."
            )
        if hello["boot"] != self.hello["boot"]:
            self.restarted = True
        else:
            self._inbox.expect(hello["n"])


def _refuse_other_major(hello: dict[str, Any]) -> None:
    major = hello["protocol"][0]
    if major != MAJOR:
        raise WrongBoxError(
            f"The box speaks version {major} of the wire, this host version {MAJOR}.",
            remedy="Use host and firmware of the same major version.",
        )


def _scale(hello: dict[str, Any]) -> float:
    """How many seconds of the box pass in one of the wall's."""
    try:
        scale = float(hello.get("time_scale", 1.0))
    except ValueError:
        return 1.0  # virtual: the link has the box's own clock
    return scale if 0.0 < scale < math.inf else 1.0


def _lost(url: str) -> LinkError:
    return LinkError(
        f"The link to {url} is lost.",
        remedy="The box discharges the part by itself. Connect again; it keeps the last two minutes.",
    )
