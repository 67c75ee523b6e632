"""The log of what passed over the wire: every line with its time and direction, so that it can be read and replayed.

    12.345 > {"jsonrpc":"2.0",...}      sent
    12.350 < {"jsonrpc":"2.0",...}      received

Times are the link's own seconds: virtual for an emulated box in this process. A byte that is no part of a readable line (a
control character, what is not UTF-8) stands as \\xNN, and so does the backslash of a \\x that was in the line itself; so the bytes
come back as they were. JSON knows no \\x: a line of the wire stands as it is.
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import IO

from dwellbench.errors import UsageError

_ESCAPED = re.compile(rb"\\x([0-9a-f]{2})")


class WireLog:
    """Appends to a file, line by line; half lines wait for their end."""

    def __init__(self, path: Path) -> None:
        try:
            self._file: IO[str] = path.open("a", encoding="utf-8", newline="\n")
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
            self._file.write(f"{now_s:.3f} {way} {_readable(line)}\n")

    def close(self) -> None:
        """Write what is left of half lines, and close."""
        if self._file.closed:
            return
        for way, rest in self._partial.items():
            if rest:
                self._file.write(f"# unfinished {way} {_readable(rest)}\n")
        self._file.close()


def _readable(line: bytes) -> str:
    text = line.replace(b"\\x", b"\\x5cx").decode("utf-8", "backslashreplace")
    return "".join(one if one.isprintable() else _escape(one) for one in text)


def _escape(one: str) -> str:
    return "".join(f"\\x{byte:02x}" for byte in one.encode())


def _bytes(text: str) -> bytes:
    return _ESCAPED.sub(lambda match: bytes([int(match[1], 16)]), text.encode())


def read_log(path: Path) -> list[tuple[float, str, bytes]]:
    """Return (time, direction, line with its newline) of a log's whole lines, byte for byte as they passed."""
    found = []
    for text in path.read_text(encoding="utf-8").split("\n"):
        if text and not text.startswith("#"):
            time, way, line = text.split(" ", 2)
            found.append((float(time), way, _bytes(line) + b"\n"))
    return found
