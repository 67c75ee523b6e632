"""What all commands share: the global options, the configuration file, and where output goes.

Options may stand before or after the command. What is said nearest wins: the option after the command, the one before it, the
environment, the configuration file.
"""

from __future__ import annotations

import json
import sys
import tomllib
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeVar

import click
import platformdirs
from rich.console import Console

from dwellbench.errors import UsageError
from dwellbench.limits.decide import Thresholds

APP = "dwellbench"
_PLAIN_WIDTH = 150  # of tables that go into a file or a pipe
F = TypeVar("F", bound=Callable[..., Any])


@dataclass
class Options:
    """The global options of one call, and what the configuration file adds."""

    box: str | None = None
    records: Path | None = None
    json: bool = False
    streams: bool = False
    wire_log: Path | None = None
    config: Path | None = None
    places: dict[str, str] = field(default_factory=dict)
    thresholds: Thresholds = field(default_factory=Thresholds)

    @property
    def records_path(self) -> Path:
        """Where records are kept."""
        return self.records or Path(platformdirs.user_data_path(APP)) / "records.db"

    def say(self, text: str = "") -> None:
        """A line for people: on standard output, or on standard error when that is a document's."""
        click.echo(text, err=self.json)

    def document(self, value: dict[str, Any], *, line: bool = False) -> None:
        """A JSON document (or one line of a stream) on standard output."""
        plain = "utf" not in (sys.stdout.encoding or "").lower()  # a pipe that cannot carry every letter
        click.echo(json.dumps(value, indent=None if line else 2, ensure_ascii=plain))

    def console(self) -> Console:
        """Rich output for people, on the same stream as `say`."""
        console = Console(stderr=self.json, highlight=False)
        return (
            console if console.is_terminal else Console(stderr=self.json, highlight=False, width=_PLAIN_WIDTH)
        )


def global_options(command: F) -> F:
    """Add the global options to a command or group."""
    for option in reversed(_OPTIONS):
        command = option(command)
    return command


_OPTIONS = (
    click.option(
        "--box", metavar="URL", help="Serial port, any pyserial URL, or emu://NAME. [env DWELLBENCH_BOX]"
    ),
    click.option(
        "--records",
        type=click.Path(path_type=Path),
        metavar="FILE",
        help="Where records are kept. [env DWELLBENCH_RECORDS]",
    ),
    click.option(
        "--json",
        "as_json",
        is_flag=True,
        default=None,
        help="One JSON document (or JSON Lines) on standard output.",
    ),
    click.option(
        "--wire-log",
        type=click.Path(path_type=Path),
        metavar="FILE",
        help="Log every line of the wire with its time.",
    ),
    click.option(
        "--config",
        type=click.Path(path_type=Path),
        metavar="FILE",
        help="Configuration file (TOML). [env DWELLBENCH_CONFIG]",
    ),
)


def take(options: Options, given: dict[str, Any]) -> None:
    """Take global options out of a command's parameters; later calls win."""
    for name, key in (
        ("box", "box"),
        ("records", "records"),
        ("json", "as_json"),
        ("wire_log", "wire_log"),
        ("config", "config"),
    ):
        value = given.pop(key, None)
        if value is not None:
            setattr(options, name, value)


def configure(options: Options, environment: dict[str, str]) -> None:
    """Fill what no option said from the environment, then from the configuration file. UsageError for a wrong file."""
    if options.config is None and environment.get("DWELLBENCH_CONFIG"):
        options.config = Path(environment["DWELLBENCH_CONFIG"])
    options.box = options.box or environment.get("DWELLBENCH_BOX") or None
    if options.records is None and environment.get("DWELLBENCH_RECORDS"):
        options.records = Path(environment["DWELLBENCH_RECORDS"])
    asked = options.config is not None
    path = options.config or Path(platformdirs.user_config_path(APP)) / "config.toml"
    if not path.exists():
        if asked:
            raise UsageError(
                f"There is no configuration file {path}.",
                remedy="Name one that exists, or leave --config out.",
            )
        return
    _take_file(options, path, _read(path))


def _read(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError) as error:
        raise UsageError(
            f"{path} cannot be read ({error}).", remedy="Correct the file or leave --config out."
        ) from None
    except tomllib.TOMLDecodeError as error:
        raise UsageError(f"{path}: {error}.", remedy="Correct the TOML there.") from None


_KNOWN = {"box": str, "records": str, "places": dict, "thresholds": dict}


def _take_file(options: Options, path: Path, file: dict[str, Any]) -> None:
    for key, value in file.items():
        if key not in _KNOWN or not isinstance(value, _KNOWN[key]):
            known = ", ".join(sorted(_KNOWN))
            raise UsageError(
                f"{path}: {key!r} is not a key of the configuration, or not of its kind.",
                remedy=f"Known are: {known}.",
            )
    options.box = options.box or file.get("box")
    if options.records is None and "records" in file:
        options.records = Path(file["records"]).expanduser()
    options.places = _places(path, file.get("places", {}))
    options.thresholds = _thresholds(path, file.get("thresholds", {}))


def _places(path: Path, table: dict[str, Any]) -> dict[str, str]:
    for name, role in table.items():
        if not isinstance(role, str):
            raise UsageError(
                f"{path}: [places] {name} is not a place in quotes.",
                remedy=f'Write it as in: {name} = "coupling@310V/470k".',
            )
    return table


def _thresholds(path: Path, table: dict[str, Any]) -> Thresholds:
    for name, value in table.items():
        if name not in ("accept", "reject"):
            raise UsageError(f"{path}: [thresholds] has no {name!r}.", remedy="It has accept and reject.")
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise UsageError(
                f"{path}: [thresholds] {name} is not a number.", remedy="Write it as in: accept = 0.95."
            )
    return Thresholds(**table)
