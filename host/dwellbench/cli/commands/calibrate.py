"""`calibrate`: the box's volts against a meter, its amperes against known resistors."""

from __future__ import annotations

from typing import Any

import click

from dwellbench.bench import Bench
from dwellbench.calibrating import (
    OFF,
    VALID_DAYS,
    calibrated,
    current,
    keep_calibration,
    measure_reference,
    next_reference,
    reference_plan,
)
from dwellbench.cli.context import Options, global_options
from dwellbench.cli.main import ready
from dwellbench.cli.prompts import ask_ready, interactive
from dwellbench.cli.reach import connect, open_store
from dwellbench.errors import UsageError
from dwellbench.judging.say import si
from dwellbench.limits.place import ohms
from dwellbench.measure.calibration import Calibration
from dwellbench.measure.fitted_scales import Known, Met, disagreements

_VOLTS = (60.0, 200.0, 300.0, 600.0)
_HELP = """Calibrate the box: its volts against a reference meter, its amperes against reference resistors.

First the meter: connect it across the clips beside a resistor of some megohms, leads insulated and led out under the closed lid,
and note what it reads while each voltage is held. Then each resistor alone, without the meter, whose own resistance would pass
current too. At last open the lid: the box takes the calibration only then. What changed by more than the doubt of both
calibrations is questioned first.

\b
Examples
  dwellbench calibrate --meter-doubt 0.02 --resistor 10M=0.05 --resistor 100M=0.1
  dwellbench calibrate --at 300 --at 600 --meter 300.12 --meter 600.31 --meter-doubt 0.02 --yes
  dwellbench calibrate --no-meter --resistor 1M=0.02          amperes only, with the volts as they are

Doubts are standard uncertainties in per cent (of a stated limit, take its half width over 1.73).

\b
Exit status: 0 done, 2 wrong input, or it disagrees with the last calibration, 5 refused by the box, 6 fault, 7 no box or link lost.
"""


@click.command("calibrate", help=_HELP)
@click.option(
    "--at", "at", type=float, multiple=True, metavar="V", help="A voltage; several. [60, 200, 300, 600]"
)
@click.option(
    "--meter", type=float, multiple=True, metavar="V", help="What the meter reads at each, in their order."
)
@click.option(
    "--meter-doubt", type=float, metavar="PERCENT", help="Standard uncertainty of the meter's gain."
)
@click.option(
    "--meter-step", type=float, default=0.01, show_default=True, metavar="V", help="Its last digit."
)
@click.option("--no-meter", is_flag=True, help="Leave the volts as they are.")
@click.option(
    "--resistor", multiple=True, metavar="OHM=PERCENT", help="A reference resistor and its doubt; several."
)
@click.option(
    "--dwell", type=float, default=10.0, show_default=True, metavar="SECONDS", help="Time at each voltage."
)
@click.option(
    "--valid", type=float, default=VALID_DAYS, show_default=True, metavar="DAYS", help="How long it holds."
)
@click.option("--accept", is_flag=True, help="Take it although it disagrees with the last one.")
@click.option("--yes", is_flag=True, help="Everything is connected in this order: do not ask.")
@global_options
@click.pass_context
def command(ctx: click.Context, /, **given: Any) -> int:
    """Run the command."""
    options = ready(ctx, given)
    given["at"] = given["at"] or _VOLTS
    resistors = [_resistor(text) for text in given["resistor"]]
    _check(given, resistors)
    with open_store(options) as store, connect(options) as box:
        last = current(box)
        met = [] if given["no_meter"] else _with_meter(options, box, given)
        known: list[Known] = []
        for ohm, doubt in resistors:
            known += _on_resistor(options, box, given, ohm, doubt, first=not (met or known))
        found = calibrated(box, last, met, (given["meter_doubt"] or 0.0) / 100.0, known, given["valid"])
        _question(options, disagreements(last, found), accept=given["accept"])
        options.say("Open the lid, so that the box can keep it.")
        keep_calibration(box, found, store)
    if options.json:
        options.document(found.as_json())
    else:
        for line in _told(found):
            options.say(line)
    return 0


def _resistor(text: str) -> tuple[float, float]:
    """OHM=PERCENT as ohms and a fraction. Raises UsageError."""
    ohm, _, percent = text.partition("=")
    try:
        value, doubt = ohms(ohm), float(percent) / 100.0
    except ValueError:
        value, doubt = 0.0, 0.0
    if not (1e3 <= value <= 1e11 and 0.0 < doubt < 0.1):
        raise UsageError(
            f"{text!r} is no reference resistor.",
            remedy="Write it like 10M=0.05: ohms, and its doubt in per cent.",
        )
    return value, doubt


def _check(given: dict[str, Any], resistors: list[tuple[float, float]]) -> None:
    """UsageError for options that do not go together, before anything is energised."""
    if given["no_meter"]:
        if not resistors:
            raise UsageError(
                "Without meter and resistor there is nothing to calibrate.", remedy="Give --resistor."
            )
        return
    doubt = given["meter_doubt"]
    if doubt is None or not 0.0 < doubt < 5.0 or not given["meter_step"] > 0.0:
        raise UsageError(
            "What the meter is in doubt by is not said.", remedy="Give --meter-doubt PERCENT, or --no-meter."
        )
    if given["meter"] and len(given["meter"]) != len(given["at"]):
        raise UsageError(
            f"There are {len(given['meter'])} readings for {len(given['at'])} voltages.",
            remedy="Give one --meter for each --at.",
        )
    if not given["meter"] and not interactive():
        raise UsageError(
            "Nobody can say what the meter reads.",
            remedy="Give the readings with --meter, one for each --at.",
        )


def _with_meter(options: Options, box: Bench, given: dict[str, Any]) -> list[Met]:
    ask_ready(
        options,
        "Connect the meter across the clips, with a resistor of some megohms, and close the lid.",
        yes=given["yes"],
    )
    runs = []
    for number, volts in enumerate(given["at"]):
        options.say(f"{volts:g} V: note what the meter reads while the voltage is held.")
        box.settle()
        found = measure_reference(box, reference_plan(box.ratings, volts, given["dwell"]))
        read = given["meter"][number] if given["meter"] else _reading(options, volts)
        if not abs(read - volts) <= OFF * volts:
            raise UsageError(
                f"A reading of {read:g} V is far from {volts:g} V.",
                remedy="See where the meter is connected, and its range.",
            )
        runs.append(Met(found, read, given["meter_step"] / 12.0**0.5))
    return runs


def _reading(options: Options, volts: float) -> float:
    value: float = click.prompt(f"What did the meter read at {volts:g} V", type=float, err=options.json)
    return value


def _on_resistor(
    options: Options, box: Bench, given: dict[str, Any], ohm: float, doubt: float, *, first: bool
) -> list[Known]:
    what = f"Fit the resistor of {si(ohm, 'ohm')}, without the meter, and close the lid."
    if not first:
        options.say(what)
        next_reference(box)
    ask_ready(options, what, yes=given["yes"])
    runs = []
    for volts in given["at"]:
        box.settle()
        runs.append(
            Known(measure_reference(box, reference_plan(box.ratings, volts, given["dwell"])), ohm, doubt)
        )
    return runs


def _question(options: Options, told: list[str], *, accept: bool) -> None:
    """A calibration that disagrees with the last is taken only when somebody says so."""
    for sentence in told:
        options.say(sentence)
    if not told or accept:
        return
    if interactive() and click.confirm(
        "It disagrees with the last calibration. Take it all the same?", err=options.json
    ):
        return
    raise UsageError(
        f"It disagrees with the last calibration ({told[0]}), so nothing was written.",
        remedy="Look at references and leads and repeat it; if it is right, give --accept.",
    )


def _told(found: Calibration) -> list[str]:
    ranges = (1.024, 0.256)
    told = [f"Calibration {found.id}, kept in the box; it holds for {found.valid_days:g} days."]
    rows = {f"volts, range {ranges[k]} V": scale for k, scale in enumerate(found.volts)}
    rows |= {
        f"amperes, shunt {('560 ohm', '100 kohm', '1 Mohm')[n]}, range {ranges[k]} V": s
        for (n, k), s in sorted(found.amps.items())
    }
    for name, scale in rows.items():
        points = f"{scale.points} points" if scale.points else "not met, as before"
        told.append(f"  {name}: standard uncertainty {100.0 * scale.u_rel:.2g} % ({points})")
    return told
