"""A cable between a host and an emulated box that can be pulled and put back, in virtual time."""

from __future__ import annotations

from typing import Any

import serial

from dwellbench.bench import Bench
from dwellbench.errors import NoBoxError
from dwellbench.wire.link import Link


class Cable:
    """A port that shows what a pulled cable shows: errors, nothing to open, and bytes under way that are gone."""

    def __init__(self, url: str) -> None:
        self.url = url
        self.port: Any = serial.serial_for_url(url)
        self.opened = 0
        self._back_s = 0.0
        self._broken = False  # once pulled, only opening again helps

    def pull(self, for_s: float) -> None:
        """Gone for so many virtual seconds."""
        self._back_s = self.port.clock() + for_s
        self._broken = True
        self.port.box.link.drop()
        self.port.box.link.attach(False)

    def _whole(self) -> None:
        if self._broken:
            raise serial.SerialException("device disconnected")

    def open(self) -> Link:
        """Open a link over it."""
        if self.port.clock() < self._back_s:
            raise NoBoxError("There is nothing to open.")
        self.port.box.link.attach(True)
        self._broken = False
        self.opened += 1
        return Link(self.url, self)

    def bench(self) -> Bench:
        """A host that opens the link again when it is lost."""
        return Bench(self.url, link=self.open(), reopen=lambda: self.open())

    # -- the port

    @property
    def box(self) -> Any:
        return self.port.box

    @property
    def timeout(self) -> Any:
        return self.port.timeout

    @timeout.setter
    def timeout(self, seconds: float) -> None:
        self._whole()
        self.port.timeout = seconds

    @property
    def in_waiting(self) -> int:
        self._whole()
        return int(self.port.in_waiting)

    def read(self, size: int) -> bytes:
        self._whole()
        data: bytes = self.port.read(size)
        return data

    def read_until(self, expected: bytes, size: int) -> bytes:
        self._whole()
        data: bytes = self.port.read_until(expected, size)
        return data

    def write(self, data: bytes) -> int:
        self._whole()
        return int(self.port.write(data))

    def clock(self) -> float:
        return float(self.port.clock())

    def wait(self, seconds: float) -> None:
        self.port.wait(seconds)

    def close(self) -> None:
        """The host lets go; the box stays."""
        self.port.box.link.attach(False)
