"""A wire log replayed: the same events that the host had, checked the same way, without a box."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from pathlib import Path

from dwellbench.wire.core import Client, Event
from dwellbench.wire.wire_log import read_log


def replayed(path: Path) -> Iterator[tuple[float, Event]]:
    """Yield (link's seconds, event) for every line that was received, in the order of the log."""
    client = Client()
    for time_s, way, line in read_log(path):
        if way == "<":
            for event in client.receive(line):
                yield time_s, event
        else:
            with contextlib.suppress(ValueError):  # the bare newline that begins a conversation
                client.sent(line.rstrip(b"\n"))
