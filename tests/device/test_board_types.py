"""The reference board's file, type-checked against the published stubs of its port (micropython-rp2-rpi_pico-stubs)."""

import subprocess
import sys
from importlib import metadata
from pathlib import Path

import pytest

DEVICE = Path(__file__).parents[2] / "device" / "dwellbox"
PACKAGES = ("micropython-rp2-rpi_pico-stubs", "micropython-stdlib-stubs")


def lay_out(root: Path) -> tuple[Path, Path]:
    """Copy the stubs into a typeshed and a module path, as mypy wants them; return both."""
    typeshed, modules = root / "typeshed", root / "modules"
    for package in PACKAGES:
        for file in metadata.files(package) or []:
            if file.suffix not in (".pyi", "") or ".." in file.parts or ".dist-info" in str(file):
                continue
            into = typeshed if file.parts[0] in ("stdlib", "stubs") else modules
            target = into / Path(*file.parts)
            target.parent.mkdir(parents=True, exist_ok=True)
            target.write_bytes(Path(str(file.locate())).read_bytes())
    (typeshed / "stubs" / "mypy-extensions").mkdir(parents=True, exist_ok=True)
    return typeshed, modules


def complaints(root: Path, board: str) -> list[str]:
    """Return what mypy says of a board file with this text."""
    typeshed, modules = lay_out(root)
    package = root / "check" / "dwellbox"
    package.mkdir(parents=True)
    for source in DEVICE.glob("*.py"):
        (package / source.name).write_text(source.read_text())
    (package / "board_rp2.py").write_text(board)
    command = [sys.executable, "-m", "mypy", "--custom-typeshed-dir", str(typeshed), "--check-untyped-defs"]
    command += ["--cache-dir", str(root / "cache"), "-p", "dwellbox.board_rp2"]
    environment = {"MYPYPATH": f"{modules}:{root / 'check'}", "PATH": ""}
    done = subprocess.run(
        command, cwd=root / "check", env=environment, capture_output=True, text=True, check=False
    )
    assert "dwellbox" in done.stdout or done.returncode == 0, done.stdout + done.stderr
    return [line for line in done.stdout.splitlines() if "board_rp2.py" in line and ": error:" in line]


@pytest.fixture(scope="module")
def source() -> str:
    return (DEVICE / "board_rp2.py").read_text()


def test_the_board_uses_the_port_as_its_stubs_declare_it(tmp_path: Path, source: str) -> None:
    assert complaints(tmp_path, source) == []


def test_the_check_would_notice_a_call_that_the_port_does_not_have(tmp_path: Path, source: str) -> None:
    wrong = source.replace("machine.reset_cause()", "machine.reset_reason()")
    assert wrong != source
    assert complaints(tmp_path, wrong)
