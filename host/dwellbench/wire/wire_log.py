"""The log of what passed over the wire: every line with its time and direction, so that it can be read and replayed.

    12.345 > {"jsonrpc":"2.0",...}      sent
    12.350 < {"jsonrpc":"2.0",...}      received; what is not text stands as \\xNN

Times are the link's own seconds: virtual for an emulated box in this process.
"""

from __future__ import annotations

from pathlib import Path
from typing import IO

from dwellbench.errors import UsageError


class WireLog:
    """Appends to a file, line by line; half lines wait for their end."""

    def __init__(self, path: Path) -> None:
        try:
            self._file: IO[str] = path.open("a", encoding="utf-8")
        except OSError as error:
            raise UsageError(
                f"{path} cannot be written: {error.strerror}.", remedy="Name another file for --wire-log."
            ) from None
        self._partial = {">": b"", "<": b""}

    def sent(self, now_s: float, data: bytes) -> None:
        """Note bytes that went out."""
        self._note(">", now_s, data)

    def received(self, now_s: float, data: bytes) -> None:
        """Note bytes that came in."""
        self._note("<", now_s, data)

    def _note(self, way: str, now_s: float, data: bytes) -> None:
        *whole, self._partial[way] = (self._partial[way] + data).split(b"\n")
        for line in whole:
            self._file.write(f"{now_s:.3f} {way} {line.decode('utf-8', 'backslashreplace')}\n")

    def close(self) -> None:
        """Write what is left of half lines, and close."""
        for way, rest in self._partial.items():
            if rest:
                self._file.write(f"# unfinished {way} {rest.decode('utf-8', 'backslashreplace')}\n")
        self._file.close()


def read_log(path: Path) -> list[tuple[float, str, bytes]]:
    """Return (time, direction, line with its newline) of a log's whole lines."""
    found = []
    for text in path.read_text(encoding="utf-8").splitlines():
        if text.startswith("#"):
            continue
        time, way, line = text.split(" ", 2)
        found.append((float(time), way, line.encode() + b"\n"))
    return found
