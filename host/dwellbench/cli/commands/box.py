"""`box`: who is connected, what it can do, whether it may be touched."""

from __future__ import annotations

from typing import Any

import click

from dwellbench.bench import Bench
from dwellbench.cli.context import Options, global_options
from dwellbench.cli.main import ready
from dwellbench.cli.reach import connect
from dwellbench.errors import UsageError
from dwellbench.wire.codes import row
from dwellbench.wire.link import ports

_HELP = """Say who the box is: identity, firmware, ratings, interlocks, last fault. Nothing is energised.

\b
Examples
  dwellbench box                         the box that is connected
  dwellbench box --list                  serial ports of this computer
  dwellbench --box emu://film box        an emulated one
  dwellbench box --acknowledge           leave lockout, once the box says it is safe

\b
Exit status: 0 done, 5 the box refused, 6 locked out, 7 no box or link lost.
"""


@click.command("box", help=_HELP)
@click.option("--list", "list_", is_flag=True, help="List the serial ports of this computer.")
@click.option("--acknowledge", is_flag=True, help="Take note of the latched reason and leave lockout.")
@click.option(
    "--shorted",
    is_flag=True,
    help="With --acknowledge: charge that was missing has been removed with a shorting stick.",
)
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    if given["list_"]:
        return _list(options)
    if given["shorted"] and not given["acknowledge"]:
        raise UsageError("--shorted says how a lockout may be left.", remedy="Give it with --acknowledge.")
    with connect(options) as box:
        if given["acknowledge"]:
            box.wait_for(lambda now: now["safe"] or now["state"] not in ("waking", "lockout"), 60.0)
            box.acknowledge(shorted=given["shorted"])
        status = box.status()
        if options.json:
            options.document({"identity": box.identity.hello, "status": status})
        else:
            for line in described(box, status):
                options.say(line)
    return 6 if status["state"] == "lockout" else 0


def _list(options: Options) -> int:
    found = ports()
    if options.json:
        options.document({"ports": found})
        return 0
    for port in found:
        what = "nothing is known of it" if port["what"] in ("", "n/a") else port["what"]
        options.say(f"{port['url']}  {what}")
    if not found:
        options.say("No serial port is here. Without a box, try --box emu://film.")
    return 0


def described(box: Bench, status: dict[str, Any]) -> list[str]:
    """The box in sentences."""
    ratings = box.ratings
    told = [
        f"It gives up to {ratings.volts_V:g} V, {ratings.energy_J:g} J, {ratings.capacitance_F * 1e6:g} uF, {ratings.dwell_s:g} s.",
        f"It is in {status['state']}: {row('states', status['state'])['text']}.",
        _touch(status),
        f"The lid is {status['lid']}, {'locked' if status['locked'] else 'not locked'}.",
        f"{status['temp_mc'] / 1000:.1f} C beside the part.",
    ]
    if status["stop"]:
        told.append("The stop button is pressed.")
    if status["fault"]:
        fault = row("faults", status["fault"])
        told.append(f"Fault: {fault['text']}. {fault['remedy']}")
    return told


def _touch(status: dict[str, Any]) -> str:
    volts = f"{round(status['part_mv'] / 1000)} V on the part"
    if status["safe"]:
        return f"{volts}; discharge is proven."
    if status["hv"] or status["part_mv"] >= 30000:
        return f"{volts}: hands off."
    return f"{volts}, but discharge is not proven yet: hands off."
