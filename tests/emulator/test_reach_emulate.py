"""The command `emulate` in a process of its own: a whole run over each way to reach it, names that are taken, and its ends."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from dwellbench.bench import open_box
from dwellbench.emulator.outlet_pty import Pty
from dwellbench.emulator.outlet_tcp import Tcp
from dwellbench.errors import UsageError

SERVE = "from dwellbench.cli.main import main; main()"


@pytest.fixture
def served(tmp_path: Path) -> Iterator[Any]:
    """Start `dwellbench emulate` in another process and return it with the URL it says."""
    processes = []

    def start(*arguments: str) -> tuple[subprocess.Popen[str], str]:
        environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
        command = [
            sys.executable,
            "-c",
            SERVE,
            "emulate",
            "--json",
            "--seed",
            "3",
            "--speed",
            "20",
            *arguments,
        ]
        process = subprocess.Popen(
            command, env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        )
        processes.append(process)
        assert process.stdout is not None
        line = process.stdout.readline()
        return process, json.loads(line)["url"] if line else ""

    yield start
    for process in processes:
        process.terminate()
        process.communicate(timeout=10)


def test_a_run_over_tcp_and_a_client_that_goes_and_comes_back(served: Any) -> None:
    _, url = served("--tcp", "127.0.0.1:0")
    with open_box(url) as box:
        assert box.identity.hello["time_scale"] == "20"
        boot = box.identity.boot
    with open_box(url) as box:
        assert box.identity.boot == boot
        assert box.test("47n 630V film", "coupling").verdict == "fit"


def test_a_run_over_a_pseudo_terminal_and_nothing_left_behind(served: Any, tmp_path: Path) -> None:
    link = tmp_path / "bench"
    process, url = served("--pty", str(link), "--interpreter", "micropython")
    assert url == str(link)
    with open_box(url) as box:
        box.settle()
        assert box.identity.simulated
    process.terminate()
    process.wait(timeout=10)
    assert not link.is_symlink()


def test_a_port_in_use_and_a_name_that_exists(served: Any, tmp_path: Path) -> None:
    _, url = served("--tcp", "127.0.0.1:0")
    with pytest.raises(UsageError, match="in use"):
        Tcp("127.0.0.1", int(url.rsplit(":", 1)[1]))
    taken = tmp_path / "taken"
    taken.touch()
    with pytest.raises(UsageError, match="exists already"):
        Pty(taken)
    with pytest.raises(UsageError, match="cannot be made"):
        Pty(tmp_path / "no" / "folder")


@pytest.mark.parametrize("end", [signal.SIGINT, signal.SIGTERM])
@pytest.mark.parametrize("interpreter", ["cpython", "micropython"])
def test_a_signal_ends_it_cleanly(tmp_path: Path, end: signal.Signals, interpreter: str) -> None:
    link, state = tmp_path / "bench", tmp_path / "kept.json"
    command = [
        sys.executable,
        "-c",
        "from dwellbench.cli.main import main; main()",
        "emulate",
        "--pty",
        str(link),
    ]
    process = subprocess.Popen(
        [*command, "--state", str(state), "--interpreter", interpreter, "--speed", "20"],
        env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    end_by = time.monotonic() + 20
    while not link.is_symlink():
        assert time.monotonic() < end_by
        time.sleep(0.01)
    with open_box(str(link)) as box:
        assert box.identity.boot == 1
    process.send_signal(end)
    out, err = process.communicate(timeout=20)
    assert "Traceback" not in out + err
    assert process.returncode == 0
    assert not link.is_symlink()
    assert json.loads(state.read_text(encoding="utf-8"))["world"]
    assert not (tmp_path / "kept.json.lock").exists()
