"""The pseudo-terminal that an emulated box is served on. Nobody knows whether a host has its other end open, so one is taken to be."""

from __future__ import annotations

import contextlib
import os
import select
from pathlib import Path

try:
    import tty
except ImportError:  # Windows
    tty = None  # type: ignore[assignment]

from dwellbench.emulator.emulated_box import EmulatedBox
from dwellbench.errors import UsageError

_CHUNK = 4096


class Pty:
    """A pseudo-terminal under a symbolic link of the user's choice."""

    def __init__(self, link: Path) -> None:
        if not hasattr(os, "openpty") or tty is None:
            raise UsageError("This computer has no pseudo-terminals.", remedy="Use --tcp.")
        if link.is_symlink() and not link.exists():
            link.unlink()  # left behind by a process that was killed
        if link.exists() or link.is_symlink():
            raise UsageError(
                f"{link} exists already.",
                remedy="Choose another name, or remove it if no emulator serves it.",
            )
        self._master, self._slave = os.openpty()  # the slave stays open, so that a host may come and go
        tty.setraw(self._slave)
        os.set_blocking(self._master, False)
        self.name = os.ttyname(self._slave)
        self._link = link
        self._held = b""
        try:
            link.symlink_to(self.name)
        except OSError as error:
            self._release()
            raise UsageError(
                f"{link} cannot be made: {error.strerror}.",
                remedy="Choose a folder you may write to.",
            ) from None

    @property
    def held(self) -> bool:
        """Bytes that the reader has not made room for yet."""
        return bool(self._held)

    def exchange(self, box: EmulatedBox, wait_s: float) -> None:
        """Nobody knows whether a host has the slave open, so one is taken to be there."""
        if not box.link.attached:
            box.link.attach(True)
        self._held = self._held or box.link.pull(_CHUNK)
        writing = [self._master] if self._held else []
        readable, writable, _ = select.select([self._master], writing, [], max(0.0, wait_s))
        if writable:
            with contextlib.suppress(BlockingIOError):
                self._held = self._held[os.write(self._master, self._held) :]
        if readable:
            with contextlib.suppress(BlockingIOError):
                box.link.push(os.read(self._master, _CHUNK))

    def close(self) -> None:
        """Remove the link, if it is still ours."""
        with contextlib.suppress(OSError):
            if os.readlink(self._link) == self.name:
                self._link.unlink()
        self._release()

    def _release(self) -> None:
        os.close(self._master)
        os.close(self._slave)
