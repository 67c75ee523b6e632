"""A run going into its record: each event once, whatever interrupts it."""

from __future__ import annotations

from typing import Any

from dwellbench.errors import DwellbenchError, StoppedError
from dwellbench.records import RunWriter
from dwellbench.run import Run
from dwellbench.wire.core import Notice
from dwellbench.wire.held import held


class Recording:
    """Keeps a run in a record, or nowhere when there is no store (`writer` None)."""

    def __init__(self, writer: RunWriter | None) -> None:
        self._writer = writer
        self._next_n = 0

    @property
    def name(self) -> str | None:
        """The record's name."""
        return None if self._writer is None else f"R{self._writer.id}"

    def take(self, notice: Notice) -> None:
        """Write one event, unless it is written already. An interrupt waits until it is."""
        if self._writer is None or notice.n < self._next_n:
            return
        with held():
            if notice.method == "samples":
                self._writer.rows(notice.params["rows"])
            else:
                self._writer.event(notice.method, notice.params)
            self._next_n = notice.n + 1

    def interrupted(self, run: Run | None, error: BaseException) -> None:
        """Keep what nobody has looked at yet, and say why the run was not judged."""
        if self._writer is None:
            return
        for notice in run.unseen() if run is not None else ():
            self.take(notice)
        self._writer.interrupted(_why(run, error))

    def ended(self, run: Run, outcome: dict[str, Any]) -> None:
        """Close it with its outcome."""
        if self._writer is not None:
            self._writer.end(run.end, run.fault, outcome)


def _why(run: Run | None, error: BaseException) -> str:
    if isinstance(error, (KeyboardInterrupt, StoppedError)):
        return "stopped by the user"
    words = error.message if isinstance(error, DwellbenchError) else repr(error)
    return f"the run did not begin: {words}" if run is None else words
