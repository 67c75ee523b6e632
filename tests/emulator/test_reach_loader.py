"""Every life of the firmware has modules of its own, and may import only what the board has."""

from __future__ import annotations

import sys
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from dwellbench import assets
from dwellbench.emulator.in_process import InProcessBox, SimulatedBoard
from dwellbench.emulator.loader import Firmware
from dwellbench.emulator.scenario import Scenario
from dwellbench.wire.core import Client


def write(folder: Path, **modules: str) -> Firmware:
    """A firmware of modules, their names with __ for the dot."""
    for name, text in modules.items():
        path = folder / (name.replace("__", "/") + ".py")
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
        if path.parent != folder:
            (path.parent / "__init__.py").touch()
    return Firmware(folder)


def test_relative_imports_at_every_level(tmp_path: Path) -> None:
    firmware = write(
        tmp_path,
        box__deep__a="from ..b import B\nfrom .c import C\nfrom . import d\nfrom .. import b as above\n",
        box__deep__c="C = 3\n",
        box__deep__d="D = 4\n",
        box__b="B = 2\nimport box.deep.c\nFOUND = box.deep.c.C\n",
    )
    module: Any = firmware.module("box.deep.a")
    assert (module.B, module.C, module.d.D, module.above.FOUND) == (2, 3, 4, 3)
    assert module.__file__ == str(tmp_path / "box" / "deep" / "a.py")


@pytest.mark.parametrize(
    "name", ["dataclasses", "typing", "numpy", "dwellbench", "micropython", "machine", "xml.dom"]
)
def test_what_the_board_lacks_cannot_be_imported(tmp_path: Path, name: str) -> None:
    with pytest.raises(ImportError, match="on the board"):
        write(tmp_path, a=f"import {name}\n").module("a")


def test_a_module_of_the_firmware_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(ImportError, match="on the board"):
        write(tmp_path, box__a="from .gone import x\n").module("box.a")
    with pytest.raises(ImportError, match="no module 'b'"):
        Firmware(tmp_path).module("b")


def test_what_the_board_has_can_be_imported(tmp_path: Path) -> None:
    module: Any = write(
        tmp_path, a="import json, struct as s\nfrom binascii import crc32\nimport os.path\n"
    ).module("a")
    assert module.json is sys.modules["json"]
    assert module.crc32(b"") == 0


def test_a_module_that_raised_is_run_again_and_tells_its_own_line(tmp_path: Path) -> None:
    firmware = write(tmp_path, a="\n\nraise ValueError('here')\n")
    for _ in range(2):
        with pytest.raises(ValueError, match="here") as caught:
            firmware.module("a")
        assert caught.traceback[-1].path == tmp_path / "a.py"
        assert caught.traceback[-1].lineno == 2


def test_a_changed_file_is_compiled_anew(tmp_path: Path) -> None:
    import os

    first: Any = write(tmp_path, a="X = 1\n").module("a")
    (tmp_path / "a.py").write_text("X = 22\n", encoding="utf-8")
    os.utime(tmp_path / "a.py", ns=(1, 1))
    second: Any = Firmware(tmp_path).module("a")
    assert (first.X, second.X) == (1, 22)


def test_two_boxes_share_no_module_and_leave_none_behind() -> None:
    before = set(sys.modules)
    one, two = (InProcessBox(Scenario.load("film"), seed) for seed in (1, 2))
    one.tick()
    two.tick()
    assert type(one.controller) is not type(two.controller)
    kept = {id(value) for value in globals_of(one).values() if isinstance(value, (bytearray, list, dict))}
    assert not kept & {id(value) for value in globals_of(two).values()}
    assert {name for name in set(sys.modules) - before if name.startswith("dwellbox")} == set()


def globals_of(box: InProcessBox) -> dict[str, Any]:
    """What the modules of a box's controller hold, by module and name."""
    found: dict[str, Any] = {}
    todo = [type(box.controller).__init__.__globals__]
    seen: set[int] = set()
    while todo:
        names = todo.pop()
        if id(names) in seen:
            continue
        seen.add(id(names))
        for name, value in names.items():
            if name.startswith("__"):
                continue
            found[f"{names['__name__']}.{name}"] = value
            inside = (
                vars(value)
                if isinstance(value, ModuleType)
                else getattr(getattr(value, "__init__", None), "__globals__", {})
            )
            if str(inside.get("__name__", "")).startswith("dwellbox"):
                todo.append(inside)
    return found


def test_the_board_has_every_method_of_the_seam() -> None:
    seam = Firmware(assets.device()).module("dwellbox.board").Board
    board = SimulatedBoard(InProcessBox(Scenario.load("film"), 1))
    for name in vars(seam):
        assert name.startswith("__") or hasattr(board, name), name


class Enough(BaseException):
    """Ends main.py's endless loop."""


def test_main_itself_says_the_same_bytes_as_the_stepped_controller(monkeypatch: pytest.MonkeyPatch) -> None:
    """main.py, unmodified, with the world advanced inside its `wait_period`."""
    periods = 3000
    monkeypatch.chdir(assets.device())
    client = Client()
    asks = {
        10: client.request("hello")[0],
        200: client.request("status")[0],
        2500: client.request("status")[0],
    }
    looped = InProcessBox(Scenario.load("film"), 7)
    looped.link.attach(True)
    heard = bytearray()
    firmware = Firmware(assets.device())
    board = SimulatedBoard(looped)
    wait = board.wait_period
    count = iter(range(1, periods + 1))

    def waited() -> None:
        wait()
        done = next(count)
        heard.extend(looped.link.pull())
        if done == periods:
            raise Enough
        looped.link.push(asks.get(done, b""))

    board.wait_period = waited  # type: ignore[method-assign]
    fake = ModuleType("dwellbox.board_here")
    fake.make_board = lambda: board  # type: ignore[attr-defined]
    firmware._modules["dwellbox.board_here"] = fake
    looped.link.push(asks.get(0, b""))
    with pytest.raises(Enough):
        firmware.module("main")
    assert heard.count(b"\n") == 3
    assert heard == stepped_bytes(periods, asks)


def stepped_bytes(periods: int, asks: dict[int, bytes]) -> bytearray:
    """The same conversation, the controller stepped from outside."""
    box = InProcessBox(Scenario.load("film"), 7)
    box.link.attach(True)
    heard = bytearray()
    for period in range(periods):
        box.link.push(asks.get(period, b""))
        box.tick()
        heard.extend(box.link.pull())
    return heard
