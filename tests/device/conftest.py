"""The vectors beside these tests are imported by them and by MicroPython alike, so they are found by their own name."""

import sys
from pathlib import Path

HERE = str(Path(__file__).resolve().parent)
if HERE not in sys.path:
    sys.path.insert(0, HERE)
