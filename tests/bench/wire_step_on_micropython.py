"""Run under MicroPython by `wire_step`: bytes of heap that each kind of work of the wire takes, collection off."""

import binascii
import gc

from dwellbox.ring import Ring
from dwellbox.wire import Wire

SAMPLE = (1000005, 6, 2, 1, 18, 288000, 15990, 16010, 20, -3, -4, 5, 0, 16384, 16390, 0, 0)


class Link:
    def __init__(self):
        self.line = b""
        self.at = 0
        self.count = 0

    def now_ms(self):
        return 0

    def get(self):
        if self.at >= len(self.line):
            return -1
        self.at += 1
        return self.line[self.at - 1]

    def room(self):
        return 64

    def put(self, byte):
        self.count += 1


class Handler:
    def call(self, method, params, crc_ok):
        return PAIRS


PAIRS = [("state", "dwell"), ("t", 40000), ("left_ms", 38000), ("hv", True)]
link = Link()
ring = Ring(1280)
wire = Wire(link, ring, Handler(), 3)


def asked(method):
    body = b'{"jsonrpc":"2.0","id":1,"method":"' + method + b'","params":{}'
    return body + b',"crc":"%08x"}\n' % binascii.crc32(body)


def serve():
    """Step until all is quiet; return the periods. Allocates nothing itself."""
    periods = 1
    wire.step(0)
    while wire.pending() or link.at < len(link.line):
        wire.step(0)
        periods += 1
    return periods


def measured(name, begin):
    begin()
    gc.collect()
    gc.disable()
    before = gc.mem_alloc()
    periods = serve()
    taken = gc.mem_alloc() - before
    gc.enable()
    print(f"{name:28}{periods:6} periods{taken:8} bytes")


def say(method):
    link.line = asked(method)
    link.at = 0


def samples(count):
    for _ in range(count):
        ring.sample(*SAMPLE)


say(b"hello")
serve()
measured("nothing to do", lambda: None)
measured("one live sample", lambda: samples(1))
measured("three that waited", lambda: samples(3))
measured("an event", lambda: ring.state(5, 1, 1, "held"))
measured("keepalive and its answer", lambda: say(b"keepalive"))
