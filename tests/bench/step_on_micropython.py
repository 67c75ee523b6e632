"""Run under MicroPython by `step`: a steady step at rest over a board that does nothing, against an empty loop turn."""

import json
import time

from dwellbox.board import Board
from dwellbox.codes import CH_REFERENCE_A, CH_REFERENCE_B, CH_THERMISTOR, IN_LID_A, REST
from dwellbox.controller import Controller

TURNS = 4000
REFERENCE = 6400
WARM = 16384


class Still(Board):
    """A box at rest: nothing on the part, the lid closed, the clock going on by a period a step."""

    def __init__(self):
        self._now = 0
        self._codes = [0, 0]
        self._kept = {}

    def now_ms(self):
        return self._now

    def wait_period(self):
        self._now += 5

    def inputs(self):
        return IN_LID_A

    def convert(self, unit, channel, full_scale):
        code = 0
        if channel in (CH_REFERENCE_A, CH_REFERENCE_B):
            code = REFERENCE
        elif channel == CH_THERMISTOR:
            code = WARM
        self._codes[unit] = code

    def code(self, unit):
        return self._codes[unit]

    def outputs(self, bits):
        pass

    def supply_mv(self, mv):
        pass

    def pump(self):
        pass

    def feed(self):
        pass

    def get(self):
        return -1

    def room(self):
        return 64

    def put(self, byte):
        pass

    def keep(self, name, data):
        self._kept[name] = data

    def kept(self, name):
        return self._kept.get(name)

    def scratch(self):
        return 0

    def set_scratch(self, value):
        pass

    def cause(self):
        return 0

    def unique_id(self):
        return "0" * 16


def step_us(controller, board):
    """Return microseconds of one step, its wait included."""
    begin = time.ticks_us()
    for _ in range(TURNS):
        controller.step()
        board.wait_period()
    return (time.ticks_us() - begin) / TURNS


def empty_us():
    """Return microseconds of one empty turn."""
    begin = time.ticks_us()
    for _ in range(TURNS * 50):
        pass
    return (time.ticks_us() - begin) / (TURNS * 50)


with open("reference_box.json") as file:
    board = Still()
    controller = Controller(board, json.load(file))
step_us(controller, board)
step_us(controller, board)
assert controller.course.state == REST, controller.course.state
step = min(step_us(controller, board) for _ in range(3))
empty = min(empty_us() for _ in range(3))
print("a step at rest takes", round(step / empty), "empty loop turns under MicroPython")
