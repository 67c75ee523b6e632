"""Run a script beside this file under the real MicroPython."""

from __future__ import annotations

import os
import subprocess
from pathlib import Path

import pytest

from dwellbench.emulator import lockstep
from dwellbench.errors import UsageError

HERE = Path(__file__).resolve().parent
DEVICE = HERE.parents[1] / "device"


def interpreter() -> str:
    """The path of MicroPython. Where continuous integration runs, its absence is a failure."""
    try:
        return lockstep.interpreter()
    except UsageError:
        if os.environ.get("CI"):
            pytest.fail("MicroPython is part of what continuous integration runs, and is not here")
        pytest.skip("no MicroPython on this computer")


def run_script(name: str, *options: str, path: tuple[Path, ...] = (DEVICE,)) -> str:
    """What the script prints; its traceback is the failure. `path` is where it finds the firmware."""
    places = ":".join([".frozen", *map(str, path), str(HERE)])
    done = subprocess.run(
        [interpreter(), *options, str(HERE / name)],
        env={**os.environ, "MICROPYPATH": places},
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return done.stdout
