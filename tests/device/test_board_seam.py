"""Every board has exactly the methods that the seam's table names, with as many arguments."""

from __future__ import annotations

import ast
import re
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
SEAM = dict(
    re.findall(r"^    (\w+)\((.*?)\)  ", (ROOT / "device/dwellbox/board.py").read_text("utf-8"), re.MULTILINE)
)
BOARDS = {
    "device/dwellbox/board_rp2.py": "BoardRp2",
    "host/dwellbench/emulator/in_process.py": "SimulatedBoard",
    "host/dwellbench/emulator/micropython/dwellboard.py": "PipeBoard",
}
# handed over as attributes in `__init__`, straight to where the bytes are
HANDED = {"SimulatedBoard": {"get", "room", "put", "now_ms"}}


def methods(path: str, name: str) -> dict[str, int]:
    """Public methods of a class: how many arguments each takes beside self."""
    tree = ast.parse((ROOT / path).read_text("utf-8"))
    (found,) = [node for node in ast.walk(tree) if isinstance(node, ast.ClassDef) and node.name == name]
    return {
        node.name: len(node.args.args) - 1
        for node in found.body
        if isinstance(node, ast.FunctionDef) and not node.name.startswith("_")
    }


def test_the_table_is_there() -> None:
    assert len(SEAM) == 19
    assert {"now_ms", "wait_period", "convert", "code", "pump", "keep", "restart_plain"} <= set(SEAM)


@pytest.mark.parametrize("path", BOARDS)
def test_a_board_has_the_seams_methods(path: str) -> None:
    name = BOARDS[path]
    own = methods(path, name)
    for method, arguments in SEAM.items():
        if method in HANDED.get(name, ()):
            continue
        wanted = len([word for word in arguments.split(",") if word.strip()])
        assert own.get(method) == wanted, method
