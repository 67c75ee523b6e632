"""The `dwellbench` command: global options, the table of commands, and every error in one clear sentence."""

from __future__ import annotations

import io
import os
import sys
from collections.abc import Sequence
from contextlib import suppress
from importlib import import_module
from typing import Any

import click

from dwellbench import __version__
from dwellbench.cli.context import Options, configure, global_options, take
from dwellbench.errors import BugError, DwellbenchError, StoppedError, UsageError

# name of the command: module in cli/commands with a `command`
COMMANDS = {
    "demo": "demo",
    "test": "test",
    "analyse": "analyse",
    "box": "box",
    "emulate": "emulate",
    "records": "records",
    "limits": "limits",
    "zero": "zero",
    "calibrate": "calibrate",
}
STREAMS = ("demo", "emulate")  # with --json these print lines that carry `event`, an error's too

_EPILOG = """
Exit status: 0 done (test, analyse: fit), 3 unfit, 4 undecided, 2 wrong usage or input, 5 the box refused, 6 fault or lockout,
7 link lost or no box, 8 records unusable, 130 stopped by you, 1 our bug.

The box holds lethal voltage and stored charge. Follow your local codes and licensed practice; nothing here replaces the
interlock in the wiring.
"""


class Table(click.Group):
    """Commands are imported when they are used."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """In the order of the table."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, name: str) -> click.Command | None:
        """Import the command's file."""
        if name not in COMMANDS:
            return None
        command: click.Command = import_module(f"dwellbench.cli.commands.{COMMANDS[name]}").command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Say what there is when a command is not known."""
        name = args[0] if args else ""
        ctx.obj.streams = name in STREAMS
        if name not in COMMANDS and not name.startswith("-"):
            raise UsageError(
                f"There is no command {name!r}.",
                remedy=f"There are: {', '.join(COMMANDS)}. See dwellbench --help.",
            )
        return super().resolve_command(ctx, args)


@click.group(
    cls=Table,
    epilog=_EPILOG,
    invoke_without_command=True,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 110},
)
@click.version_option(__version__, prog_name="dwellbench")
@global_options
@click.pass_context
def cli(ctx: click.Context, /, **given: Any) -> None:
    """May this capacitor go into a circuit at hundreds of volts?

    Try it without a box: dwellbench demo, or dwellbench --box emu://film test "47n 630V film" --role coupling --yes
    """
    take(ctx.obj, given)
    if ctx.invoked_subcommand is None:
        tell_commands(ctx)


def tell_commands(ctx: click.Context) -> None:
    """Say what commands there are, to people; a script gets an error for leaving its command out."""
    if ctx.obj.json:
        raise UsageError("No command was given.", remedy=f"See {ctx.command_path} --help.")
    click.echo(ctx.get_help())


def ready(ctx: click.Context, given: dict[str, Any]) -> Options:
    """Return the options of a command: what it was given itself, then environment and configuration."""
    options: Options = ctx.obj
    take(options, given)
    configure(options, dict(os.environ))
    return options


def main(arguments: Sequence[str] | None = None) -> None:
    """Run, and leave with the documented status."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(
                errors="replace"
            )  # a letter that the terminal does not have is no reason to fail
    sys.exit(run(list(sys.argv[1:] if arguments is None else arguments)))


def run(arguments: list[str]) -> int:
    """Run a command line and return its status; never a traceback."""
    options = Options(json="--json" in arguments)
    try:
        status = cli.main(arguments, prog_name="dwellbench", standalone_mode=False, obj=options)
        sys.stdout.flush()
    except DwellbenchError as error:
        return _failed(options, error)
    except click.exceptions.Exit as leave:
        return int(leave.exit_code)
    except click.ClickException as error:
        return _failed(options, _usage(error))
    except (click.Abort, KeyboardInterrupt):
        return _failed(options, StoppedError("Stopped by you; no run was under way."))
    except (BrokenPipeError, SystemExit):  # click leaves by the second when a pipe breaks, and then only
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return StoppedError.exit  # whoever read has gone: nothing more to say, and no verdict was told
    except Exception as error:
        return _failed(options, _bug(error))
    return status if isinstance(status, int) else 0


def _usage(error: click.ClickException) -> UsageError:
    words = error.format_message()
    where = error.ctx.command_path if isinstance(error, click.UsageError) and error.ctx else "dwellbench"
    if "extra argument" in words:
        return UsageError(
            words, remedy=f'Put a marking in quotes, as in "47n 630V film". See {where} --help.'
        )
    return UsageError(words, remedy=f"See {where} --help.")


def _bug(error: Exception) -> BugError:
    import tempfile
    import traceback

    with tempfile.NamedTemporaryFile(
        "w", prefix="dwellbench-", suffix=".txt", delete=False, encoding="utf-8"
    ) as file:
        file.write(traceback.format_exc())
    return BugError(
        f"dwellbench met a defect of its own ({type(error).__name__}: {error}).",
        remedy=f"Please report it with {file.name}.",
    )


def _failed(options: Options, error: DwellbenchError) -> int:
    with suppress(BrokenPipeError):  # nobody reads any more; the status stands
        _tell(options, error)
    return error.exit


def _tell(options: Options, error: DwellbenchError) -> None:
    if options.json:
        event = {"event": "error"} if options.streams else {}
        options.document({**event, **error.as_json()}, line=options.streams)
        return
    readings = [f"    {reading}" for reading in error.details.get("readings", [])]
    for line in (f"dwellbench: {error.message}", *readings, error.remedy):
        if line:
            click.echo(line, err=True)
