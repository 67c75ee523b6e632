"""Run under MicroPython: the firmware's own files over the same vectors. One line a layer: its name and how many it checked.

    MICROPYPATH=.frozen:device:tests/device micropython tests/device/on_micropython.py

An assertion that fails ends the process with MicroPython's own traceback, which the test shows.
"""

import binascii
import json

from wire_vectors import BAD, CRC, ENCODE, FRACTION, JUDGE, NUMBERS, ROWS, SCAN, TWICE

from dwellbox import compat
from dwellbox import plain as library
from dwellbox.encode import Line, text
from dwellbox.ring import Ring
from dwellbox.rpc import judge
from dwellbox.scan import NOT_WHOLE, Scanner
from dwellbox.wire import Refusal


class Sink:
    """A link with room for `room` bytes a period."""

    def __init__(self, room):
        self._room = room
        self._left = 0
        self.data = bytearray()

    def next_period(self):
        self._left = self._room

    def room(self):
        return self._left

    def put(self, byte):
        assert self._left > 0
        self._left -= 1
        self.data.append(byte)


def plain(value):
    if value is NOT_WHOLE:
        return FRACTION
    if isinstance(value, list):
        return [plain(item) for item in value]
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    return value


def check_native():
    """What the wire uses here, machine code where the interpreter makes it; and the library's way, which others take."""
    for made in (compat, library):
        for data, expected in CRC:
            out = bytearray(10)
            made.hex_crc(data + b"more", len(data), out, 1)
            assert out == b"\0" + expected.encode() + b"\0", (data, out)
            assert made.put_bytes(out, 2, data, 3 if len(data) > 3 else len(data)) == 2 + min(3, len(data))
            assert out[2 : 2 + min(3, len(data))] == data[:3], out
        for value in NUMBERS:
            out = bytearray(16)
            end = made.put_number(out, 2, value)
            assert out[:end] == b"\0\0" + str(value).encode() and not any(out[end:]), (value, out)
    return len(CRC) + len(NUMBERS)


def check_scan():
    scanner = Scanner()
    for data, expected in SCAN:
        for tail in (b"", b" \t\r", b" x"):
            scanner.begin()
            for byte in data + tail:
                scanner.feed(byte)
            if tail == b" x":
                assert not scanner.finish(), data
            elif scanner.finish():
                found = plain(scanner.value)
                assert found == expected and type(found) is type(expected), (data, found)
            else:
                assert expected == BAD, data
    for data in TWICE:
        scanner.begin()
        for byte in data:
            scanner.feed(byte)
        assert scanner.finish() and scanner.twice, data
    return len(SCAN) + len(TWICE)


def check_encode():
    for value, expected in ENCODE:
        assert text(value) == expected, (value, text(value))
    return len(ENCODE)


def check_rows():
    line = Line(7)
    for row in ROWS:
        for room in (64, 1, 5):
            ring = Ring(64)
            ring.sample(*row)
            line.begin_samples(ring, 0, 1)
            sink = Sink(room)
            while line.busy:
                sink.next_period()
                line.send(sink, 1000)
            body = bytes(sink.data)[:-19]
            assert bytes(sink.data)[-19:] == b',"crc":"%08x"}\n' % binascii.crc32(body), sink.data
            numbers = json.loads(body + b"}")["params"].pop("rows")[0]
            assert numbers[0] == 0 and numbers[1:] == list(row), sink.data
    return len(ROWS)


def check_judge():
    scanner = Scanner()
    for line, error, data, id_ in JUDGE:
        scanner.begin()
        for byte in line:
            scanner.feed(byte)
        request = judge(line, len(line), scanner)
        assert (request.error, request.data) == (error, data), (line, request.error, request.data)
        if id_ is not None:
            assert request.id == id_ and type(request.id) is type(id_), (line, request.id)
    return len(JUDGE)


def check_refusal():
    """An exception class of our own over MicroPython's native one must keep its members."""
    try:
        raise Refusal(-32011, "why")
    except Refusal as refusal:
        assert (refusal.code, refusal.data) == (-32011, "why")
    return 1


def makes_machine_code():
    return 0 if compat.hex_crc is library.hex_crc else 1


for name, check in (
    ("machine_code", makes_machine_code),
    ("native", check_native),
    ("scan", check_scan),
    ("encode", check_encode),
    ("rows", check_rows),
    ("judge", check_judge),
    ("refusal", check_refusal),
):
    print(name, check())
