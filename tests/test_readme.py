"""Every command and example that README shows runs."""

from __future__ import annotations

import os
import re
import shlex
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

from dwellbench.cli import main as cli
from dwellbench.cli.context import Options, _take_file

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text("utf-8")
BLOCKS = re.findall(r"```(\w+)\n(.*?)```", README, re.DOTALL)
COMMANDS = [
    line.strip()
    for kind, block in BLOCKS
    if kind == "sh"
    for line in block.splitlines()
    if line.startswith("dwellbench ") and " emulate " not in line and "/tmp/bench" not in line
]


@pytest.fixture(scope="module")
def bench(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("readme")
    trace = next((ROOT / "tests" / "measure" / "data").glob("film*.csv"))
    (folder / "run.csv").write_bytes(trace.read_bytes())
    return folder


@pytest.mark.parametrize("line", COMMANDS)
def test_a_command_of_readme_runs(
    line: str, bench: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(bench)
    monkeypatch.setenv("DWELLBENCH_RECORDS", str(bench / "records.db"))
    monkeypatch.setenv("XDG_CONFIG_HOME", str(bench))
    status = cli.run(shlex.split(line)[1:])
    assert status in (0, 3, 4), capsys.readouterr().err


@pytest.mark.skipif(sys.platform == "win32", reason="pseudo-terminals")
def test_the_two_terminals_of_readme_find_each_other(
    bench: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """As shown, but for the name of the pseudo-terminal and the speed: a minute of holding takes a second."""
    (block,) = [block for kind, block in BLOCKS if kind == "sh" and "emulate --pty" in block]
    serving, testing = (
        shlex.split(line.replace("/tmp/bench", str(tmp_path / "bench")))[1:] for line in block.splitlines()
    )
    monkeypatch.setenv("DWELLBENCH_RECORDS", str(tmp_path / "records.db"))
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path))
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join(sys.path))
    command = [sys.executable, "-c", "from dwellbench.cli.main import main; main()", *serving]
    with subprocess.Popen([*command, "--speed", "60"], stdout=subprocess.PIPE) as server:
        try:
            assert server.stdout is not None
            assert b"An emulated box is at" in server.stdout.readline()
            status = cli.run(testing)
        finally:
            server.terminate()
    assert status == 0, capsys.readouterr().err
    assert "simulated" in capsys.readouterr().out
    assert server.returncode == 0


def test_the_python_example_runs(
    bench: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(bench)
    (example,) = [block for kind, block in BLOCKS if kind == "python"]
    exec(compile(example, "README.md", "exec"), {})
    assert capsys.readouterr().out.startswith("fit ")


def test_the_configuration_example_is_one(tmp_path: Path) -> None:
    (example,) = [block for kind, block in BLOCKS if kind == "toml"]
    options = Options()
    _take_file(options, tmp_path / "config.toml", tomllib.loads(example))
    assert options.places["output_stage"] == "coupling@310V/470k"


def test_the_two_commands_are_there_once() -> None:
    lines = README.splitlines()
    assert sum("dwellbench demo" in line for line in lines) == 1
    assert sum("'.[test]'" in line for line in lines) == 1
