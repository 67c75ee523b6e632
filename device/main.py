"""Boot: safe levels first, then the board, then the controller's loop.

The stop button held at power-up leads into the plain interpreter instead: safe levels, no controller, no watchdog. That and
the `maintenance` request are the only ways out, and all that loading new firmware needs. At power-up only: whoever presses it
while the watchdog resets the controller wants a guarded box, not one that is dead.
"""

import json

from dwellbox.board import CAUSE_POWER
from dwellbox.board_here import make_board
from dwellbox.codes import IN_STOP
from dwellbox.controller import Controller


def main():
    """Run until the power goes or maintenance is asked for."""
    board = make_board()  # its first act is to set every output to its safe level
    held = board.cause() == CAUSE_POWER and board.inputs() & IN_STOP
    if held or board.wants_plain():
        return
    with open("reference_box.json") as file:
        reference = json.load(file)
    controller = Controller(board, reference, board.build())
    while True:
        controller.step()
        board.wait_period()


main()
