"""Stands in for main.py under MicroPython: the same loop, with the heap locked around every steady step.

Steady is: at rest or holding, half a second after the state was entered, nothing coming in. An allocation there raises
MemoryError, which the controller would take for a fault of the board and go to lockout; so it is looked at after each step.
At the end one line a state: its name, how many of its periods were locked, how many sample rows were kept and sent meanwhile.
"""

import json

import micropython

from dwellbox.board_here import make_board
from dwellbox.codes import DWELL, LOCKOUT, REST, STATES
from dwellbox.controller import Controller

SETTLED = 100  # periods
LEFT_MS = 50

board = make_board()
with open("reference_box.json") as file:
    controller = Controller(board, json.load(file), board.build())
course = controller.course
ring = controller.ring
locked = [0] * len(STATES)
rows = [0] * len(STATES)


def steady(age):
    """Say whether this period must not touch the heap."""
    if age < SETTLED or board._got or controller.wire._work or controller.wire._length:
        return False
    return course.state == REST or (course.state == DWELL and course.left_ms() > LEFT_MS)


def loop():
    """Run until the world ends."""
    state = -1
    age = 0
    while True:
        if course.state != state:
            state = course.state
            age = 0
        age += 1
        if steady(age):
            before = ring.n
            micropython.heap_lock()
            try:
                controller.step()
            finally:
                micropython.heap_unlock()
            if course.state == LOCKOUT:
                raise AssertionError(
                    "the heap was touched in " + STATES[state] + ": " + str(ring.note(ring.n - 1))
                )
            locked[state] += 1
            rows[state] += ring.n - before
        else:
            controller.step()
        board.wait_period()


try:
    loop()
except SystemExit:
    for state in (REST, DWELL):
        print(STATES[state], locked[state], rows[state])
