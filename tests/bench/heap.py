"""What the firmware takes of the heap: when imported, when built, over a whole run, and the least heap that carries a run.

    python -m tests.bench.heap

Measured under the real MicroPython on the firmware as it goes on the board (`dwellbench.firmware_build`), in the emulated box. That
interpreter is a 64-bit build: a pointer, and so each object, entry and name, is twice the board's; bytes of buffers and of
byte code are the same. For the board's own figures run the same files under a 32-bit build; one measurement, with the WebAssembly
port of MicroPython 1.27 (not among this project's tools), is printed beside for comparison. The plan is 180 kB on the board.
"""

from __future__ import annotations

import tempfile
from pathlib import Path

from dwellbench import assets
from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.errors import BugError
from dwellbench.firmware_build import build, compiled
from dwellbench.wire.core import Client

HERE = Path(__file__).resolve().parent
PLENTY_K = 1024
STEP_K = 4
GOAL_K = 128
SEED = 5
PLAN = {"run_key": "k", "volts_mv": 250_000, "dwell_ms": 3000, "expect_pf": 47_000}

# One measurement with 32-bit objects, bytes after a collection.
ON_32_BITS = {"import": 69_300, "objects": 46_000}


def prepared(folder: Path) -> Path:
    """The firmware for the board, the emulated board beside it, compiled alike, and this benchmark in the place of main."""
    build(assets.device(), folder)
    board = HERE.parents[1] / "host" / "dwellbench" / "emulator" / "micropython" / "dwellboard.py"
    for name, path in (("dwellboard", board), ("measured", HERE / "heap_on_micropython.py")):
        (folder / f"{name}.mpy").write_bytes(compiled(name, path.read_text(encoding="utf-8")))
    (folder / "main.py").write_text("import measured\nmeasured.main()\n", encoding="utf-8")
    return folder


def whole_run(folder: Path, heap_k: int) -> dict[str, int] | None:
    """What the benchmark told of a run in so much heap; None when it did not get through."""
    box = LockstepBox(Scenario.load("film"), SEED)
    box.firmware = box.board = folder
    box.heap = f"{heap_k}K"
    box.link.attach(True)
    client = Client()
    asked = {10: client.request("hello")[0], 6500: client.request("run", PLAN)[0]}
    asked[11_600] = client.request("samples", {"from": 0, "count": 200})[0]
    out = bytearray()
    try:
        for period in range(12_000):
            box.link.push(asked.get(period, b""))
            if period % 100 == 0:
                box.link.push(client.notify("keepalive"))
            box.tick()
            out += box.link.pull()
        box._to.close()  # the world ends, and main tells
        said = box.process.stdout.read().decode() if box.process and box.process.stdout else ""
    except BugError:
        return None
    finally:
        box.stop()
    if b'"end":"complete"' not in out:
        return None
    return {name: int(value) for name, value in (line.split() for line in said.splitlines())}


def least(folder: Path) -> int:
    """The least heap in kilobytes, to a step, that carries the run."""
    low, high = 0, PLENTY_K // STEP_K
    while high - low > 1:
        middle = (low + high) // 2
        if whole_run(folder, middle * STEP_K) is None:
            low = middle
        else:
            high = middle
    return high * STEP_K


def main() -> None:
    """Print the figures."""
    with tempfile.TemporaryDirectory() as name:
        folder = prepared(Path(name))
        told = whole_run(folder, PLENTY_K)
        assert told is not None, "the run does not get through at all"
        for what, value in told.items():
            beside = f"   with 32-bit objects {ON_32_BITS[what]}" if what in ON_32_BITS else ""
            print(f"{what:16}{value:9}{beside}")
        least_k = least(folder)
        print(
            f"{'least heap':16}{least_k * 1024:9}   goal {GOAL_K * 1024}: {'met' if least_k <= GOAL_K else 'not met'}"
        )


if __name__ == "__main__":
    main()
