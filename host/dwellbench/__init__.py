"""dwellbench: may this capacitor go into a circuit at hundreds of volts?

    import dwellbench
    part = dwellbench.Part.parse("47n 630V film")
    with dwellbench.open_box("emu://film") as box:
        outcome = box.test(part, role="coupling")
    print(outcome.verdict, outcome.reason)

`analyse(trace, part)` does the same computing on a recorded trace; `Store(path)` keeps records. Importing this package makes
the URL `emu://` known to pyserial.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

import serial

__version__ = "0.1.0"

_HANDLERS = "dwellbench.emulator.handlers"
if _HANDLERS not in serial.protocol_handler_packages:
    serial.protocol_handler_packages.append(_HANDLERS)

# Where the public names live; they are imported when they are first used, so that a script pays for what it needs.
_PUBLIC = {
    "open_box": "dwellbench.bench",
    "Bench": "dwellbench.bench",
    "Box": "dwellbench.box",
    "Part": "dwellbench.part",
    "Plan": "dwellbench.plan",
    "Outcome": "dwellbench.outcome",
    "Quantity": "dwellbench.quantity",
    "analyse": "dwellbench.judge",
    "Store": "dwellbench.records",
    "DwellbenchError": "dwellbench.errors",
}
__all__ = [
    "Bench",
    "Box",
    "DwellbenchError",
    "Outcome",
    "Part",
    "Plan",
    "Quantity",
    "Store",
    "__version__",
    "analyse",
    "open_box",
]

if TYPE_CHECKING:
    from dwellbench.bench import Bench, open_box
    from dwellbench.box import Box
    from dwellbench.errors import DwellbenchError
    from dwellbench.judge import analyse
    from dwellbench.outcome import Outcome
    from dwellbench.part import Part
    from dwellbench.plan import Plan
    from dwellbench.quantity import Quantity
    from dwellbench.records import Store


def __getattr__(name: str) -> Any:
    if name not in _PUBLIC:
        raise AttributeError(f"module 'dwellbench' has no attribute {name!r}")
    return getattr(import_module(_PUBLIC[name]), name)
