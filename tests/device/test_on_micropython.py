"""The same vectors through the same firmware files under the real MicroPython, in one process for all."""

from __future__ import annotations

import platform

from micropython_process import run_script
from wire_vectors import CRC, ENCODE, JUDGE, NUMBERS, ROWS, SCAN, TWICE


def test_vectors() -> None:
    said = dict(line.split() for line in run_script("on_micropython.py", "-X", "heapsize=512K").splitlines())
    counts = {
        "machine_code": int(platform.machine() in ("x86_64", "AMD64")),  # what this MicroPython makes it for
        "native": len(CRC) + len(NUMBERS),
        "scan": len(SCAN) + len(TWICE),
        "encode": len(ENCODE),
        "rows": len(ROWS),
        "judge": len(JUDGE),
        "refusal": 1,
    }
    assert said == {name: str(count) for name, count in counts.items()}
