"""Asking the person at the bench. Without a terminal a prompt fails, unless --yes answers it."""

from __future__ import annotations

import sys

import click

from dwellbench.cli.context import Options
from dwellbench.errors import UsageError

CAUTIONS = (
    "The box puts up to 650 V on the part. Loose parts only, never one in a chassis. Follow your local codes and licensed",
    "practice; do not defeat the lid. Do not energise a bulged, leaking or cracked part; old oil-filled parts may hold PCB.",
)


def interactive() -> bool:
    """Whether somebody can answer."""
    return sys.stdin.isatty()


def ask_ready(options: Options, what: str, *, yes: bool) -> None:
    """Say the cautions, and ask that the part is in and the lid closed. UsageError when nobody can answer."""
    for line in CAUTIONS:
        options.say(line)
    if yes:
        return
    if not interactive():
        raise UsageError(
            "There is no terminal to answer on.",
            remedy="Give --yes when the part is in and the lid is closed.",
        )
    click.prompt(f"{what} Then press Enter", default="", show_default=False, err=options.json)
