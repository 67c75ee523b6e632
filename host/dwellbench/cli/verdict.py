"""The end of a test, told: one word that can be read from a step away, then why, in full."""

from __future__ import annotations

from rich.padding import Padding
from rich.text import Text

from dwellbench.cli import say
from dwellbench.cli.context import Options
from dwellbench.cli.large import large
from dwellbench.outcome import Outcome

_INDENT = 4


def tell_outcome(options: Options, outcome: Outcome) -> None:
    """Say the outcome: large in a terminal, in plain lines elsewhere."""
    word, following = say.word(outcome), say.next_words(outcome)
    console = options.console()
    if console.is_terminal:
        rows = large(word, console.width - 2 * _INDENT)
        console.print(Padding(Text("\n".join(rows), no_wrap=True), (1, _INDENT)))
        console.print(Padding(Text(following, style="bold"), (0, _INDENT, 1, _INDENT)))
    else:
        options.say(f"\n    {word}" + (f"  -  {following}" if following else "") + "\n")
    for line in say.lines(outcome):
        options.say(line)
