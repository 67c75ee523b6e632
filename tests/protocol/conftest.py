"""Helpers beside these tests are found by their own name; hypothesis draws the same examples every time."""

import sys
from pathlib import Path

from hypothesis import settings

HERE = str(Path(__file__).resolve().parent)
if HERE not in sys.path:
    sys.path.insert(0, HERE)

settings.register_profile("fixed", derandomize=True, deadline=None, database=None)
settings.load_profile("fixed")
