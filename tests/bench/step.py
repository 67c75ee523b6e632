"""What a step of the whole firmware costs: counted for the reference board, and as a ratio to an empty loop under MicroPython.

    python -m tests.bench.step

The budget is 2 ms for a steady step and 4 ms at worst, of a period of 5 ms. Counted are the firmware's byte codes and calls over a
whole run, by the model of `board_cost`, without what the board's own drivers take (two conversions read and started over I2C take
about 0.7 ms beside; from memory). The ratio is of wall time on this computer: of use only against itself.
"""

from __future__ import annotations

import subprocess
from collections import defaultdict
from pathlib import Path
from types import CodeType

from dwellbench import assets
from dwellbench.emulator import lockstep
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.wire.core import Client
from dwellbox.codes import STATES

from .board_cost import Count
from .wire_step import _NATIVE

PLAN = {"run_key": "k", "volts_mv": 250_000, "dwell_ms": 2000, "expect_pf": 47_000, "bleed_ms": 1000}
STEADY_US, WORST_US = 2000, 4000


def _firmware(code: CodeType) -> bool:
    path = Path(code.co_filename)
    return path.name != "plain.py" and assets.device() in path.parents


class CountedBox(InProcessBox):
    """Counts each step once it is told to."""

    counting = False

    def step(self) -> None:
        """One turn of the loop, counted."""
        if not self.counting:
            super().step()
            return
        state = self.controller.course.state
        self.us[state].append(self._count.of(self._step))
        self.calls[state].append(self._count.calls)
        self._wait()

    def start(self) -> None:
        """As ever, with a counter."""
        super().start()
        self._count = Count(_firmware, _NATIVE)
        self.us: dict[int, list[float]] = defaultdict(list)
        self.calls: dict[int, list[int]] = defaultdict(list)


def counted_run() -> CountedBox:
    """A run from rest to rest, every period counted."""
    box = CountedBox(Scenario.load("film"), 1)
    client = Client()
    box.link.attach(True)
    for period in range(9000):
        line = client.notify("keepalive") if period % 100 == 0 else b""
        line += client.request("hello")[0] if period == 10 else b""
        line += client.request("run", PLAN)[0] if period == 6600 else b""
        box.link.push(line)
        box.counting = period >= 6500
        box.tick()
        box.link.pull()
    return box


def table(box: CountedBox) -> None:
    """Print each state's periods, calls and microseconds."""
    print(f"{'state':12}{'periods':>8}{'calls':>8}{'median us':>11}{'99 % us':>9}{'worst us':>10}")
    for state, us in sorted(box.us.items()):
        ordered = sorted(us)
        calls = sorted(box.calls[state])[len(us) // 2]
        middle, high, worst = ordered[len(us) // 2], ordered[len(us) * 99 // 100], ordered[-1]
        print(f"{STATES[state]:12}{len(us):8}{calls:8}{middle:11.0f}{high:9.0f}{worst:10.0f}")
    print(f"budget: {STEADY_US} us steady, {WORST_US} us at worst")


def ratio() -> str:
    """A steady step's time over an empty loop turn's, under the real MicroPython."""
    done = subprocess.run(
        [
            lockstep.interpreter(),
            "-X",
            "heapsize=1M",
            str(Path(__file__).with_name("step_on_micropython.py")),
        ],
        env={"MICROPYPATH": f".frozen:{assets.device()}"},
        cwd=assets.device(),
        capture_output=True,
        text=True,
        check=True,
    )
    return done.stdout


def main() -> None:
    """Print the table and the ratio."""
    table(counted_run())
    print(ratio(), end="")


if __name__ == "__main__":
    main()
