"""Who drives which box: an advisory lock on a small file beside the records, which a killed process lets go of by itself.

Two boxes may share a store; the same box may not be driven twice at once through it. A run that is open in the store while nobody
holds its box's lock was interrupted.
"""

from __future__ import annotations

import errno
import hashlib
import os
from pathlib import Path
from typing import IO

from dwellbench.errors import StoreError

try:
    import fcntl
except ImportError:  # Windows
    fcntl = None  # type: ignore[assignment]
    import msvcrt

_HELD = (errno.EACCES, errno.EAGAIN, errno.EDEADLK, errno.EWOULDBLOCK)
"""What systems answer when another process has the lock; anything else means that there are no locks here."""


class BoxLock:
    """Held while the object lives and is not released."""

    def __init__(self, store: Path, box: str) -> None:
        """`store` by whichever name: links to one file lead to one lock."""
        name = hashlib.sha256(box.encode()).hexdigest()[:16]
        store = store.resolve()
        self._path = store.with_name(f"{store.name}.box-{name}.lock")
        self._file: IO[bytes] | None = None

    def take(self) -> None:
        """Take it, or raise StoreError because another process has it."""
        if not self.try_take():
            raise StoreError(
                "Another program is driving this box with these records.",
                remedy="Wait for its end, or stop it; one program drives a box at a time.",
                cause="box_taken",
            )

    def try_take(self) -> bool:
        """Take it if it is free; say whether it is held now. Raises StoreError where it cannot be told."""
        if self._file is not None:
            return True
        try:
            file = open(self._path, "a+b")  # noqa: SIM115  (kept open: closing it lets the lock go)
            if not _locked(file):
                file.close()
                return False
        except OSError as error:
            raise StoreError(
                f"{self._path} cannot be made or locked: {error.strerror}.",
                remedy="Keep the records on a disk of this machine, in a folder that you may write.",
                cause="cannot_lock",
            ) from None
        self._file = file
        return True

    def release(self) -> None:
        """Let it go. The small file stays: removing it would let two processes hold two files of one name."""
        if self._file is not None:
            self._file.close()
            self._file = None


def _locked(file: IO[bytes]) -> bool:
    """Try to lock it; False if another has it. OSError where locks do not work."""
    try:
        if fcntl is not None:
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        else:
            file.seek(0)
            msvcrt.locking(file.fileno(), msvcrt.LK_NBLCK, 1)  # type: ignore[attr-defined, unused-ignore]
    except OSError as error:
        if error.errno in _HELD:
            return False
        file.close()
        raise
    return True


def this_process() -> str:
    """A word for who wrote a run, for people who look into the file."""
    return f"pid {os.getpid()}"
