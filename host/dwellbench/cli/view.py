"""The live view of a run: large plain sentences in a terminal, plain lines elsewhere."""

from __future__ import annotations

from types import TracebackType

from rich.console import Console, Group
from rich.live import Live
from rich.padding import Padding
from rich.text import Text

from dwellbench.cli.context import Options
from dwellbench.cli.teller import STOPPING, Teller, Told
from dwellbench.plan import Plan
from dwellbench.run import Run
from dwellbench.wire.core import Notice

PLAIN_EVERY_S = 15.0


class View:
    """A watcher of one run. Use it as a context manager."""

    def __init__(self, options: Options, title: str) -> None:
        self._options = options
        self._title = title
        self._console: Console = options.console()
        self._teller: Teller | None = None
        self._live: Live | None = None
        self._said_ms = 0

    def __enter__(self) -> View:
        if self._console.is_terminal:
            self._live = Live(console=self._console, refresh_per_second=5, transient=True)
            self._live.__enter__()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._live is not None:
            self._live.__exit__(kind, error, trace)
            self._live = None

    def began(self, plan: Plan, run: Run) -> None:
        """The box has accepted the plan."""
        self._teller = Teller(plan, run.estimate_s)
        run.while_stopping = lambda notice: self._stopping(notice, run)
        if self._live is None:
            self._options.say(f"{self._title}: the box has begun; about {run.estimate_s:.0f} s.")

    def happened(self, notice: Notice, run: Run) -> None:
        """Show how things stand."""
        teller = self._teller
        if teller is None:
            return
        changed = teller.take(notice, run)
        if self._live is not None:
            self._live.update(drawn(self._title, teller.told()), refresh=changed)  # no stage passes unseen
        elif changed or self._due(notice):
            self._options.say("  " + " ".join(teller.told().lines()))

    def _stopping(self, notice: Notice, run: Run) -> None:
        """The same while the user's stop is under way, which must be told: it takes its time."""
        if self._teller is not None and not self._teller.stopping:
            self._teller.stopping = True
            if self._live is None:
                self._options.say(f"  {STOPPING}")
            else:
                self._live.update(drawn(self._title, self._teller.told()), refresh=True)
        self.happened(notice, run)

    def _due(self, notice: Notice) -> bool:
        if notice.method != "samples":
            return False
        now_ms = notice.params["rows"][-1][1]
        if now_ms - self._said_ms < PLAIN_EVERY_S * 1000:
            return False
        self._said_ms = now_ms
        return True


def drawn(title: str, told: Told) -> Group:
    """The sentences, largest first: what matters for the hands stands alone and bold."""
    first = Text(told.on_part, style="bold reverse")
    rest = Text("\n".join(told.lines()[1:]))
    return Group(Text(title, style="bold"), Padding(first, (1, 2)), Padding(rest, (0, 2, 1, 2)))
