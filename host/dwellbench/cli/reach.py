"""Reaching box and records for a command, with what must be said on the way."""

from __future__ import annotations

from dwellbench.bench import Bench, open_box
from dwellbench.cli.context import Options
from dwellbench.errors import NoBoxError
from dwellbench.records import Store
from dwellbench.wire.link import ports

_HINT = "Connect it, or name it with --box URL. Without hardware, try it with --box emu://demo."


def connect(options: Options) -> Bench:
    """Connect to the box that was named, or to the only one there is. NoBoxError otherwise."""
    url = options.box or _only_port()
    box = open_box(url, wire_log=options.wire_log)
    identity = box.identity
    emulated = ", emulated: everything it measures is simulated" if identity.simulated else ""
    options.say(f"Box {identity.box} ({identity.model}, firmware {identity.firmware}{emulated}).")
    return box


def _only_port() -> str:
    found = [
        port["url"] for port in ports() if port["what"] not in ("", "n/a")
    ]  # others have nothing plugged in
    if not found:
        raise NoBoxError("No box is connected.", remedy=_HINT)
    if len(found) > 1:
        raise NoBoxError(
            f"There are several ports: {', '.join(found)}.", remedy="Say which is the box's with --box."
        )
    return found[0]


def settle(options: Options, box: Bench) -> None:
    """Wait for the box to be at rest, and say so when that takes a while."""
    if box.status()["state"] not in ("rest", "lockout"):
        options.say("The box first proves that nothing is charged; that takes up to half a minute.")
    box.settle()


def open_store(options: Options) -> Store:
    """Open the records, and say which runs an earlier program left behind."""
    store = Store(options.records_path)
    for left in store.unfinished():
        options.say(
            f"{left.name} ({left.marking}) was interrupted: its program ended before the run did. What it had measured is kept."
        )
    return store
