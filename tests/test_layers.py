"""The order of the layers, held by reading every import."""

from __future__ import annotations

import ast
import tomllib
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
HOST = ROOT / "host" / "dwellbench"
DEVICE = ROOT / "device"

# Each may import itself and those before it. Names are modules or packages directly in dwellbench.
ORDER = (
    {"errors"},
    {"assets"},
    {"quantity"},
    {"marking"},
    {"part"},
    {"measure"},
    {"limits"},
    {"plan"},
    {"outcome"},
    {"judging"},
    {"judge"},
    {"wire"},
    {"run", "box"},  # a run is followed through its box
    {"records"},
    {"recording"},
    {"bench", "zeroing", "calibrating"},
    {"cli"},
)
RANK = {name: rank for rank, names in enumerate(ORDER) for name in names}
ASIDE = {
    "emulator": "plan",
    "firmware_build": "assets",
    "firmware_fold": "assets",
}  # name: the last layer it may import
OPEN_TO_EMULATOR = ("emulator/", "cli/")

# What MicroPython has, beside the ports' own modules in the board files.
MICROPYTHON = {"json", "struct", "binascii", "array", "gc", "sys", "micropython", "dwellboard"}
PORT = {"machine", "select", "time", "os", "rp2"}


def imports(path: Path) -> set[str]:
    """Every module a file imports, relative ones as they are resolved in dwellbox."""
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            found.add("." * node.level + (node.module or ""))
            if node.module == "dwellbench":
                found |= {f"dwellbench.{alias.name}" for alias in node.names}
    return found


def layer(path: Path) -> str:
    return path.relative_to(HOST).parts[0].removesuffix(".py")


FILES = sorted(path for path in HOST.rglob("*.py") if "micropython" not in path.parts)


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.relative_to(HOST).as_posix())
def test_a_layer_imports_only_those_before_it(path: Path) -> None:
    own = layer(path)
    if own == "__init__":
        return  # the public names
    for name in imports(path):
        top, _, rest = name.partition(".")
        other = rest.split(".")[0]
        if top != "dwellbench" or not other or other in (own, "__version__"):
            continue
        if other == "emulator":
            assert str(path.relative_to(HOST)).startswith(OPEN_TO_EMULATOR), name
        elif own in ASIDE:
            assert other in ASIDE or RANK[other] <= RANK[ASIDE[own]], name
        else:
            assert other in ASIDE or RANK[other] <= RANK[own], name


def test_every_module_has_its_place_in_the_order() -> None:
    assert {layer(path) for path in FILES} - {"__init__"} <= set(RANK) | set(ASIDE)


def test_numpy_is_the_only_library_of_the_computing_layers() -> None:
    allowed = {"numpy", "dwellbench", "__future__"}
    import sys

    for path in FILES:
        if layer(path) in (
            "quantity",
            "marking",
            "part",
            "measure",
            "limits",
            "plan",
            "outcome",
            "judging",
            "judge",
        ):
            tops = {name.split(".")[0] for name in imports(path)}
            assert tops - allowed - set(sys.stdlib_module_names) == set(), path


@pytest.mark.parametrize("path", sorted((DEVICE / "dwellbox").rglob("*.py")), ids=lambda path: path.name)
def test_the_firmware_imports_only_itself_and_what_both_interpreters_have(path: Path) -> None:
    allowed = MICROPYTHON | (PORT if path.name.startswith("board_") else set())
    for name in imports(path):
        assert name.startswith(".") or name in allowed, name


def test_the_versions_agree() -> None:
    import dwellbench
    from dwellbox import VERSION

    project = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]
    assert project["version"] == dwellbench.__version__ == VERSION


def test_the_wheel_carries_firmware_and_protocol(tmp_path: Path) -> None:
    from hatchling.builders.wheel import WheelBuilder

    (wheel,) = WheelBuilder(str(ROOT)).build(directory=str(tmp_path), versions=["standard"])
    names = set(zipfile.ZipFile(wheel).namelist())
    for folder in ("device", "protocol"):
        for path in (ROOT / folder).rglob("*"):
            hidden = any(
                part.startswith(".") or part == "__pycache__" for part in path.relative_to(ROOT).parts
            )
            if path.is_file() and not hidden:
                assert f"dwellbench/_{folder}/{path.relative_to(ROOT / folder).as_posix()}" in names
    assert "dwellbench/py.typed" in names
    assert "dwellbench/outcome.schema.json" in names
    assert "dwellbench/emulator/scenarios/demo.toml" in names
    assert "dwellbench/emulator/micropython/dwellboard.py" in names


def test_the_top_level_holds_what_the_house_has() -> None:
    import subprocess

    listed = subprocess.run(
        ["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=False
    ).stdout.splitlines()
    tops = {name.split("/")[0] for name in listed if not name.startswith(".")}
    house = {
        "README.md",
        "DEVELOPERS.md",
        "pyproject.toml",
        "device",
        "host",
        "protocol",
        "tests",
        "hardware_notes",
    }
    assert tops <= house
