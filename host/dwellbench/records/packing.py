"""Sample rows in few bytes: columns of differences as 32-bit whole numbers, compressed; and a hash over the rows themselves.

Differences from row to row are small, so a run of 1,000 rows takes some kilobytes instead of ninety. Nothing is rounded: the
differences wrap around at 32 bits, and so does their sum.
"""

from __future__ import annotations

import hashlib
import struct
import zlib
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

COLUMNS = 18
_HEAD = struct.Struct("<4sI")
_MAGIC = b"row1"


def pack(rows: Sequence[Sequence[int]] | NDArray[np.int64]) -> bytes:
    """Return rows (n, 18) of whole numbers of 32 bits with sign as bytes. ValueError if they are none."""
    table = np.asarray(rows, dtype=np.int64).reshape(len(rows), COLUMNS)
    narrow = table.astype("<i4")
    if not np.array_equal(narrow, table):
        raise ValueError("a sample row has a number beyond 32 bits")
    differences = (
        np.diff(narrow, axis=0, prepend=np.zeros((1, COLUMNS), dtype="<i4")) if len(table) else narrow
    )
    return _HEAD.pack(_MAGIC, len(table)) + zlib.compress(differences.T.tobytes(), 6)


def unpack(data: bytes) -> NDArray[np.int64]:
    """Return the rows, shape (n, 18). ValueError if the bytes are not such rows."""
    try:
        magic, count = _HEAD.unpack_from(data)
        expected = 4 * count * COLUMNS
        stream = zlib.decompressobj()
        plain = stream.decompress(
            data[_HEAD.size :], expected + 1
        )  # no more than that, whatever the bytes are
    except (struct.error, zlib.error, TypeError) as error:
        raise ValueError(f"not packed sample rows: {error}") from None
    if magic != _MAGIC or len(plain) != expected or not stream.eof or stream.unused_data:
        raise ValueError("not packed sample rows")
    differences = np.frombuffer(plain, dtype="<i4").reshape(COLUMNS, count).T
    return np.cumsum(differences, axis=0, dtype=np.int32).astype(np.int64)


def hash_of(rows: Sequence[Sequence[int]] | NDArray[np.int64]) -> str:
    """Return the SHA-256 over the rows, whatever the packing."""
    table = np.asarray(rows, dtype="<i8").reshape(len(rows), COLUMNS)
    return hashlib.sha256(table.tobytes()).hexdigest()
