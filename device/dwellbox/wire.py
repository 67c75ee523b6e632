"""The wire: lines in, lines out, never blocking the loop.

In: a few bytes a period, scanned as they come. A whole line is then dealt with one step a period: judged, executed, answered a
few members at a time; the next line is read after that. Out: answers first, then events asked for again, then events as they
happen, each line sent a few bytes a period while the link has room. Whatever bytes arrive, the box answers or ignores.

Events go out from the ring by a cursor. It stalls while nobody reads, and skips to the oldest kept event when the ring has
overtaken it; the host sees the gap in `n` and asks again. Before the first `hello` nobody is there and nothing is sent.

Answers wait in a short queue. While it is full no more is read, so that a host that pipelines loses nothing; but a host that has
not read for 200 ms is not waited for: commands are still executed (an abort must be), and their answers are dropped and counted.

Budget: 1.2 ms a period on the reference board, the board's own calls included (`tests/bench/wire_step.py` counts it). So the
steps below are small: a request is answered within about 0.1 s of its last byte, an abort is executed within 0.02 s of it.
"""

from .codes import E_INTERNAL_ERROR, E_LINE_TOO_LONG
from .compat import const, ticks_diff
from .encode import Line
from .replies import Replies
from .ring import SAMPLE
from .rpc import NO_ID, judge
from .scan import Scanner

# A period takes 5 bytes in, 1.0 kB/s: a host's longest request is in within 0.5 s. Out go 9, 1.8 kB/s, or 14 where the port can
# tell how much room it has; ten samples a second need 1.6, or 1.0 when they share lines.
_IN = const(5)
_OUT_US = const(1000)
_OUT_BESIDE_US = const(150)  # while something else is done in the same period
_LONGEST = const(511)  # bytes of a line before its newline
_QUEUE = const(4)
_PATIENCE_MS = const(200)
_COUNT = const(64)  # events sent again where the request does not say

_JUDGE = const(1)  # what is to be done next with the line that came
_EXECUTE = const(2)
_WRITE = const(3)


class Refusal(Exception):
    """Raised by the handler: an error code of the wire and what explains it."""

    def __init__(self, code, data=None):
        """Take the code and a word, or None."""
        super().__init__(code, data)
        self.code = code
        self.data = data


class Wire:
    """`step` once a period. `handler.call(method, params, crc_ok)` gives result pairs or raises Refusal."""

    def __init__(self, board, ring, handler, boot):
        """Take the board (its link), the ring, the handler, and the number of this start."""
        self._board = board
        self._ring = ring
        self._handler = handler
        self._line = Line(boot)
        self._replies = Replies(_QUEUE)
        self._scanner = Scanner()
        self._buffer = bytearray(_LONGEST)
        self._length = 0
        self._long = False
        self._work = 0
        self._request = None
        self._live = -1
        self._again = 0
        self._again_end = 0
        self._moved_ms = 0
        self.last_heard_ms = board.now_ms()
        self.dropped = 0

    def step(self, now):
        """Serve the link for one period. Never raises: a link that fails costs the lines under way, not the loop."""
        try:
            self._serve(now)
        except Exception:
            self._line.busy = False
            self._line.open = False
            self.dropped += 1

    def _serve(self, now):
        line = self._line
        if self._work:
            self._go_on(now)
            if line.busy and not line.open and line.send(self._board, _OUT_BESIDE_US):
                self._moved_ms = now
            return
        taken = self._take(now)
        if line.open:
            line.write_row(self._ring)
        elif line.busy:
            if line.send(self._board, _OUT_BESIDE_US if taken else _OUT_US):
                self._moved_ms = now
        elif not self._next():
            self._moved_ms = now  # nothing waits for the host

    def pending(self):
        """Say whether an answer is still on its way."""
        return self._line.busy or self._work > 0 or self._replies.waiting > 0

    # ---- in

    def _take(self, now):
        """Take bytes up to the end of a line; say how many."""
        board = self._board
        if self._replies.full() and not self._lost_patience(now):
            return 0
        byte = board.get()
        if byte < 0:
            return 0
        buffer = self._buffer
        length = self._length
        scanner = self._scanner
        count = 0
        while byte >= 0:
            count += 1
            if byte == 10:
                self._length = length
                self._end_line()
                return count
            if length < _LONGEST:
                buffer[length] = byte
                length += 1
                scanner.feed(byte)
            else:
                self._long = True
            if count >= _IN:
                break
            byte = board.get()
        self._length = length
        return count

    def _lost_patience(self, now):
        return ticks_diff(now, self._moved_ms) > _PATIENCE_MS

    def _end_line(self):
        length = self._length
        if length and self._buffer[length - 1] == 13:
            length -= 1
        if self._long:
            self._refuse(None, E_LINE_TOO_LONG, None)
            self._begin_line()
        elif length:
            self._length = length
            self._work = _JUDGE
        else:
            self._begin_line()

    def _begin_line(self):
        self._length = 0
        self._long = False
        self._scanner.begin()

    # ---- the line that came

    def _go_on(self, now):
        """Do the next step with the line that came; one a period, for each takes most of a millisecond."""
        work = self._work
        self._work = 0
        if work == _WRITE:
            if self._replies.write():
                self._work = _WRITE
        elif work == _JUDGE:
            self._judge(now)
        else:
            self._execute()

    def _judge(self, now):
        request = judge(self._buffer, self._length, self._scanner)
        self._begin_line()
        if request.crc_ok:
            self.last_heard_ms = now
        asked = request.id is not NO_ID
        if request.error:
            if asked or request.method is None:
                self._refuse(request.id if asked else None, request.error, request.data)
        elif asked or request.method != "run":  # nobody would learn whether such a run was accepted
            self._request = request
            self._work = _EXECUTE

    def _execute(self):
        request = self._request
        self._request = None
        asked = request.id is not NO_ID
        try:
            pairs = self._call(request)
        except Refusal as refusal:
            if asked:
                self._refuse(request.id, refusal.code, refusal.data)
            return
        except Exception as error:  # our own defect: answered, and the loop goes on
            if asked:
                self._refuse(request.id, E_INTERNAL_ERROR, repr(error)[:60])
            return
        if not asked:
            return
        if self._replies.full():
            self.dropped += 1
            return
        self._replies.result(request.id, pairs)
        self._work = _WRITE

    def _call(self, request):
        if request.method == "samples":
            return self._send_again(request.params)
        pairs = self._handler.call(request.method, request.params, request.crc_ok)
        if request.method == "hello":
            self._live = self._ring.n
            self._again_end = self._again  # what another host asked for
        return pairs

    def _send_again(self, params):
        ring = self._ring
        start = min(max(params["from"], ring.first), ring.n)
        stop = min(start + params.get("count", _COUNT), ring.n)
        self._again = start
        self._again_end = stop
        return [("from", start), ("count", stop - start), ("next", stop)]

    def _refuse(self, id_, code, data):
        if self._replies.full():
            self.dropped += 1
        else:
            self._replies.error(id_, code, data)

    # ---- out

    def _next(self):
        """Write the next line, if there is one to send. Its first byte goes in the next period."""
        if self._replies.waiting:
            self._replies.hand(self._line)
            return True
        ring = self._ring
        if self._again < self._again_end:
            if self._again < ring.first:
                self._again = min(ring.first, self._again_end)  # written over while it waited
            if self._again < self._again_end:
                self._again = self._begin(self._again, self._again_end)
                return True
        live = self._live
        if live < 0 or live >= ring.n:
            return False
        self._live = self._begin(ring.first if live < ring.first else live, ring.n)
        return True

    def _begin(self, n, stop):
        """Write the line of the event `n`, and of those samples before `stop` that follow it; return what comes after."""
        if self._ring.kind(n) == SAMPLE:
            self._line.begin_samples(self._ring, n, stop)
        else:
            self._line.begin_event(self._ring, n)
        return self._line.next_n
