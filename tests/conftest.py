"""For every test: what an emulated box says is what the schemas allow."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from dwellbench.wire.core import Client, Junk

DELIBERATE = Path(__file__).parent / "wire"  # there, lines that no schema allows are made on purpose


@pytest.fixture(autouse=True)
def every_line_received_is_in_its_schema(
    request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch
) -> Iterator[None]:
    """Fail a test in which a line with a right checksum was not what its schema says."""
    wrong: list[Junk] = []
    line = Client._line

    def watched(self: Client, data: bytes) -> object:
        event = line(self, data)
        if isinstance(event, Junk) and event.why.startswith(("event.", "result.", "error:")):
            wrong.append(event)
        return event

    monkeypatch.setattr(Client, "_line", watched)
    yield
    if DELIBERATE not in Path(str(request.fspath)).parents:
        assert wrong == []
