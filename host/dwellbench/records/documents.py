"""JSON documents in the file: as short as they go, and such that every reader of JSON takes them."""

from __future__ import annotations

import json
import math
from typing import Any


def dumped(document: Any) -> str:
    """Return it as JSON. What is no number (NaN, infinite) becomes null, as JSON has no word for it. Pure ASCII."""
    try:
        return json.dumps(document, separators=(",", ":"), allow_nan=False)
    except ValueError:
        return json.dumps(_finite(document), separators=(",", ":"), allow_nan=False)


def _finite(value: Any) -> Any:
    if isinstance(value, float) and not math.isfinite(value):
        return None
    if isinstance(value, dict):
        return {key: _finite(one) for key, one in value.items()}
    if isinstance(value, (list, tuple)):
        return [_finite(one) for one in value]
    return value
