"""The steady state touches no heap: proven under the real MicroPython with the heap locked, over a whole run.

A desktop build has larger small integers than the board (63 bits against 31), so `test_small_integers` stands beside this.
"""

from __future__ import annotations

import subprocess
from pathlib import Path

from micropython_process import interpreter

from dwellbench.emulator.lockstep import LockstepBox
from dwellbench.emulator.scenario import Scenario
from dwellbench.wire.core import Client, Notice

HERE = Path(__file__).resolve().parent


class LockedBox(LockstepBox):
    """The loop with the heap locked in its steady steps."""

    main = str(HERE / "locked_heap.py")


def drive(box: LockstepBox, client: Client, periods: int, request: bytes = b"") -> list[Notice]:
    """Push a request, then step, with a sign of life every half second; return the notices."""
    box.link.push(request)
    notices = []
    for period in range(periods):
        if period % 100 == 50:
            box.link.push(client.notify("keepalive"))
        box.tick()
        events = client.receive(box.link.pull())
        notices += [event for event in events if isinstance(event, Notice)]
    return notices


def test_dwell_and_rest_touch_no_heap() -> None:
    interpreter()
    box = LockedBox(Scenario.load("film"), 1)
    client = Client()
    box.link.attach(True)
    try:
        drive(box, client, 7000, client.request("hello")[0])
        plan = {"run_key": "k", "volts_mv": 250_000, "dwell_ms": 6000, "expect_pf": 47_000, "ceiling_ua": 500}
        notices = drive(box, client, 6000, client.request("run", plan)[0])
        box._to.close()  # the world ends; the loop tells what it counted
        said = box.process.stdout.read().decode() if box.process.stdout else ""
    finally:
        box.stop()
    ends = [notice.params["end"] for notice in notices if notice.method == "done"]
    counts = {
        name: (int(periods), int(rows))
        for name, periods, rows in (line.split() for line in said.splitlines())
    }
    assert ends == ["complete"], said
    assert counts["rest"][0] > 1000
    assert counts["dwell"][0] > 800, "of 1200; what is left has the host's signs of life in it"
    assert counts["dwell"][1] >= 40, "rows were kept in locked periods"


TELLS = """
import micropython
x = [1]
micropython.heap_lock()
try:
    y = x + x
except MemoryError:
    micropython.heap_unlock()
    print("told")
"""


def test_the_lock_would_show_an_allocation() -> None:
    """The proof itself can fail: the same lock around something that allocates."""
    done = subprocess.run(
        [interpreter(), "-c", TELLS], capture_output=True, text=True, timeout=20, check=False
    )
    assert done.stdout == "told\n"
