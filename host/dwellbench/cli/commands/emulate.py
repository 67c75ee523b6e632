"""`emulate`: serve an emulated box to other programs, on a pseudo-terminal or a TCP port."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from threading import Event
from typing import Any

import click

from dwellbench.cli.context import Options, global_options
from dwellbench.cli.main import ready
from dwellbench.emulator.opening import INTERPRETERS, Opening
from dwellbench.emulator.outlet_pty import Pty
from dwellbench.emulator.outlet_tcp import Tcp
from dwellbench.emulator.serve import Outlet, serve
from dwellbench.errors import UsageError

_HELP = """Serve an emulated box: the real firmware on emulated hardware, reached like a board. Ctrl-C ends it.

\b
Examples
  dwellbench emulate --pty /tmp/bench
      and in another terminal: dwellbench --box /tmp/bench test "47n 630V film" --yes
  dwellbench emulate --tcp 127.0.0.1:7777 --scenario demo --seed 7 --speed 20
      and: dwellbench --box socket://127.0.0.1:7777 box
"""


@click.command("emulate", help=_HELP)
@click.option(
    "--pty", type=click.Path(path_type=Path), metavar="LINK", help="Make a pseudo-terminal under this name."
)
@click.option("--tcp", metavar="HOST:PORT", help="Listen there; port 0 takes a free one and says which.")
@click.option(
    "--scenario",
    default="film",
    metavar="FILE",
    help="A scenario file, or the name of a packaged one. [default: film]",
)
@click.option("--seed", type=int, metavar="N", help="Seed of all chance; the scenario's if left out.")
@click.option(
    "--interpreter",
    type=click.Choice(sorted(INTERPRETERS)),
    default="cpython",
    show_default=True,
    help="Who runs the firmware.",
)
@click.option(
    "--speed",
    type=float,
    default=1.0,
    show_default=True,
    metavar="X",
    help="Virtual seconds a second; 1 is real time.",
)
@click.option(
    "--state",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="Keep the box in this file between calls.",
)
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    if (given["pty"] is None) == (given["tcp"] is None):
        raise UsageError("Say either --pty LINK or --tcp HOST:PORT.", remedy="See dwellbench emulate --help.")
    if not 0.01 <= given["speed"] <= 1000:
        raise UsageError(
            f"A speed of {given['speed']:g} is not possible.", remedy="Choose 0.01 to 1000; 1 is real time."
        )
    opening = Opening(given["scenario"], given["seed"], given["state"], given["interpreter"])
    outlet = _outlet(given)
    with _asked_to_end() as ended:
        try:
            box = opening.make(time_scale=given["speed"])
        except BaseException:
            outlet.close()
            raise
        name = given["pty"] if given["pty"] is not None else getattr(outlet, "name", "")
        _tell(options, name, given)
        serve(box, outlet, given["speed"], stop=ended.is_set, on_end=lambda: opening.leave(box))
    if options.json:
        options.document({"event": "summary", "url": str(name), "virtual_s": round(box.now_s, 3)}, line=True)
    return 0


def _tell(options: Options, name: object, given: dict[str, Any]) -> None:
    if options.json:
        options.document({"event": "serving", "url": str(name)}, line=True)
    else:
        options.say(
            f"An emulated box is at {name} (scenario {given['scenario']}, speed {given['speed']:g}). Ctrl-C ends it."
        )


@contextmanager
def _asked_to_end() -> Iterator[Event]:
    """Set by Ctrl-C or SIGTERM: between two periods, never in one, and always with the outlet closed in order."""
    ended = Event()
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    for number in before:
        signal.signal(number, lambda *_: ended.set())
    try:
        yield ended
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _outlet(given: dict[str, Any]) -> Outlet:
    if given["pty"] is not None:
        return Pty(given["pty"])
    host, _, port = given["tcp"].rpartition(":")
    if not port.isdigit() or int(port) > 65535:
        raise UsageError(
            f"{given['tcp']!r} is not HOST:PORT.", remedy="Say, for example, --tcp 127.0.0.1:7777."
        )
    return Tcp(host or "127.0.0.1", int(port))
