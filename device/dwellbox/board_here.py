"""Which board this is: the file for this port, or the one that an emulation puts on the path as `dwellboard`."""

import sys

if sys.platform == "rp2":
    from .board_rp2 import make_board
else:
    from dwellboard import make_board

__all__ = ["make_board"]
