"""Stands in for main.py under MicroPython: the same loop, with the heap's use told at the stages of its life.

A line is `NAME BYTES`: what is in use after a collection, or what came on top since the line before.
"""

import gc
import json


def used():
    """Return the bytes in use, rubbish collected."""
    gc.collect()
    return gc.mem_alloc()


def main():
    """Run until the world ends."""
    told = [("interpreter", used())]
    before = used()
    from dwellbox.board_here import make_board

    board = make_board()
    told.append(("emulated_board", used() - before))
    before = used()
    from dwellbox.controller import Controller

    told.append(("import", used() - before))
    before = used()
    with open("reference_box.json") as file:
        controller = Controller(board, json.load(file), board.build())
    told.append(("objects", used() - before))
    try:  # noqa: SIM105 - no contextlib here
        loop(controller, board)
    except SystemExit:
        pass
    told.append(("after_a_run", used()))
    for name, value in told:
        print(name, value)


def loop(controller, board):
    """Do what main.py does."""
    while True:
        controller.step()
        board.wait_period()
