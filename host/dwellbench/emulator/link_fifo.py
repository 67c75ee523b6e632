"""The board's link as a pair of bounded buffers, stalling as its USB serial does.

Out: 256 bytes, as the board's USB stack keeps. While a host is there and does not read, the buffer fills and there is no room;
with no host there is always room and what is put is lost. In: 512 bytes; what does not fit waits with the host, in a driver's
buffer of 4096 bytes. (Sizes: defaults of that port's USB stack and of common serial drivers, from memory.)
"""

from __future__ import annotations

OUT_BYTES = 256
IN_BYTES = 512
HOST_BYTES = 4096


class LinkFifo:
    """Bytes between the firmware and whoever is at the other end."""

    def __init__(self) -> None:
        self.out = bytearray()
        self.into = bytearray()
        self.waiting = bytearray()  # with the host, for want of room
        self.attached = False
        self.lost = 0

    def attach(self, there: bool) -> None:
        """A host opens or closes the port."""
        self.attached = there
        if not there:
            self.out.clear()
            self.waiting.clear()

    def push(self, data: bytes) -> None:
        """The host writes."""
        self.waiting += data
        self._refill()

    def pull(self, most: int | None = None) -> bytes:
        """The host reads."""
        taken = bytes(self.out if most is None else self.out[:most])
        del self.out[: len(taken)]
        return taken

    def host_room(self) -> int:
        """How many bytes the host may write without waiting."""
        return HOST_BYTES - len(self.waiting)

    def _refill(self) -> None:
        room = IN_BYTES - len(self.into)
        if room > 0 and self.waiting:
            self.into += self.waiting[:room]
            del self.waiting[:room]

    # -- the board's side

    def get(self) -> int:
        """The next byte for the firmware, or -1."""
        if not self.into:
            return -1
        byte = self.into[0]
        del self.into[0]
        if self.waiting:
            self._refill()
        return byte

    def room(self) -> int:
        """How many bytes the firmware may put now."""
        return OUT_BYTES - len(self.out) if self.attached else OUT_BYTES

    def put(self, byte: int) -> None:
        """One byte from the firmware."""
        if self.attached:
            self.out.append(byte)
        else:
            self.lost += 1

    def drop(self) -> None:
        """What is under way is lost, both ways: the cable, or a controller that starts anew."""
        self.out.clear()
        self.into.clear()
        self.waiting.clear()
