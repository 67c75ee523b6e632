"""The log of what passed: readable, and the same bytes when it is read back."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from tests.helpers import FILM, plan, scenario

from dwellbench.bench import open_box
from dwellbench.errors import UsageError
from dwellbench.wire.core import Answer, Junk, Notice
from dwellbench.wire.replay import replayed
from dwellbench.wire.wire_log import WireLog, read_log

TEXT = '{"jsonrpc":"2.0","text":"\\"12 \\u00b5F \\\\ \u03a9"}'


def test_the_log_is_read_back_line_by_line(tmp_path: Path) -> None:
    log = WireLog(tmp_path / "log")
    log.sent(1.0, b'{"a":1}\n{"b"')
    log.received(1.5, b"junk \xff\r\n")
    log.sent(2.0, b":2}\n")
    log.received(3.0, b"half")
    log.close()
    log.close()
    assert read_log(tmp_path / "log") == [
        (1.0, ">", b'{"a":1}\n'),
        (1.5, "<", b"junk \xff\r\n"),
        (2.0, ">", b'{"b":2}\n'),
    ]
    assert "# unfinished < half" in (tmp_path / "log").read_text()


def test_a_line_of_the_wire_stands_as_it_is(tmp_path: Path) -> None:
    log = WireLog(tmp_path / "log")
    log.received(0.25, TEXT.encode() + b"\n")
    log.close()
    assert (tmp_path / "log").read_text("utf-8") == f"0.250 < {TEXT}\n"


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.binary(max_size=30) | st.text(max_size=10).map(str.encode), max_size=6))
def test_any_bytes_come_back_as_they_were(tmp_path: Path, pieces: list[bytes]) -> None:
    path = tmp_path / "log"
    path.unlink(missing_ok=True)
    log = WireLog(path)
    for piece in pieces:
        log.received(0.0, piece)
    log.close()
    whole = b"".join(pieces)
    assert b"".join(line for _, _, line in read_log(path)) == whole[: whole.rfind(b"\n") + 1]


def test_a_log_replayed_gives_the_run_again(tmp_path: Path) -> None:
    url = scenario(tmp_path, FILM) + "?seed=5"
    with open_box(url, wire_log=tmp_path / "log") as box:
        box.settle()
        run = box.start(plan(box))
        seen = list(run)
    events = [event for _, event in replayed(tmp_path / "log")]
    rows = [row for event in events if isinstance(event, Notice) for row in event.params.get("rows", [])]
    assert rows == run.rows
    assert [event for event in events if isinstance(event, Notice) and event.method == "done"] == [
        notice for notice in seen if notice.method == "done"
    ]
    assert not [event for event in events if isinstance(event, Junk)]
    assert {event.method for event in events if isinstance(event, Answer)} == {"hello", "status", "run"}


def test_a_log_that_cannot_be_written_says_so(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="cannot be written"):
        WireLog(tmp_path / "no" / "such" / "folder")
