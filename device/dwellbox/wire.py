"""The wire: lines in, lines out, never blocking the loop.

In: at most 32 bytes a period, scanned as they come; a whole line is judged and executed, one a period. Out: answers first, then
events asked for again, then events as they happen, each line sent a few bytes a period while the link has room. Whatever bytes
arrive, the box answers or ignores.

Events go out from the ring by a cursor. It stalls while nobody reads, and skips to the oldest kept event when the ring has
overtaken it; the host sees the gap in `n` and asks again. Before the first `hello` nobody is there and nothing is sent.

Answers wait in a short queue. While it is full no more is read, so that a host that pipelines loses nothing; but a host that has
not read for 200 ms is not waited for: commands are still executed (an abort must be), and their answers are dropped and counted.
"""

from .codes import E_INTERNAL_ERROR, E_LINE_TOO_LONG, ERRORS
from .compat import const, ticks_diff
from .encode import LINE, Line, text
from .ring import SAMPLE
from .rpc import NO_ID, judge
from .scan import Scanner

_IN = const(32)  # bytes a period: about 1 ms on the reference board
_OUT = const(32)
_NUMBERS = const(6)  # of a sample line filled in a period
_QUEUE = const(4)
_PATIENCE_MS = const(200)
_COUNT = const(64)  # events sent again where the request does not say


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
        self._scanner = Scanner()
        self._buffer = bytearray(LINE)
        self._length = 0
        self._long = False
        self._queue = []
        self._live = -1
        self._again = 0
        self._again_end = 0
        self._moved_ms = 0
        self.last_heard_ms = board.now_ms()
        self.dropped = 0

    def step(self, now):
        """Serve the link for one period."""
        self._take(now)
        line = self._line
        if line.busy or self._next():
            if line.fill(_NUMBERS) and line.send(self._board, _OUT):
                self._moved_ms = now
        elif not self._queue:
            self._moved_ms = now

    def pending(self):
        """Say whether an answer is still on its way."""
        return self._line.busy or bool(self._queue)

    # ---- in

    def _take(self, now):
        board = self._board
        byte = board.get() if self._may_read(now) else -1
        count = 0
        while byte >= 0:
            if byte == 10:
                self._end_line(now)
                return
            if self._length < LINE - 1:
                self._buffer[self._length] = byte
                self._length += 1
                self._scanner.feed(byte)
            else:
                self._long = True
            count += 1
            if count >= _IN:
                return
            byte = board.get()

    def _may_read(self, now):
        """Say whether there is room for an answer, or the host has not read for so long that none is kept for it."""
        return len(self._queue) < _QUEUE or ticks_diff(now, self._moved_ms) > _PATIENCE_MS

    def _end_line(self, now):
        length = self._length
        if length and self._buffer[length - 1] == 13:
            length -= 1
        if self._long:
            self._answer_error(None, E_LINE_TOO_LONG, None)
        elif length:
            self._execute(judge(self._buffer, length, self._scanner), now)
        self._length = 0
        self._long = False
        self._scanner.begin()

    def _execute(self, request, now):
        asked = request.id is not NO_ID
        if request.error:
            if asked or request.method is None:
                self._answer_error(request.id if asked else None, request.error, request.data)
            return
        if request.crc_ok:
            self.last_heard_ms = now
        if request.method == "run" and not asked:
            return  # nobody would learn whether it was accepted
        try:
            pairs = self._call(request)
        except Refusal as refusal:
            if asked:
                self._answer_error(request.id, refusal.code, refusal.data)
            return
        except Exception as error:  # our own defect: answered, and the loop goes on
            if asked:
                self._answer_error(request.id, E_INTERNAL_ERROR, repr(error)[:60])
            return
        if asked:
            self._answer('"result":' + text(pairs or {}), request.id)

    def _call(self, request):
        if request.method == "samples":
            return self._send_again(request.params)
        pairs = self._handler.call(request.method, request.params, request.crc_ok)
        if request.method == "hello":
            self._live = self._ring.n
        return pairs

    def _send_again(self, params):
        ring = self._ring
        start = min(max(params["from"], ring.first), ring.n)
        stop = min(start + params.get("count", _COUNT), ring.n)
        self._again = start
        self._again_end = stop
        return [("from", start), ("count", stop - start), ("next", stop)]

    # ---- out

    def _answer(self, member, id_):
        if len(self._queue) >= _QUEUE:
            self.dropped += 1
            return
        self._queue.append('{"jsonrpc":"2.0",' + member + ',"id":' + text(id_))

    def _answer_error(self, id_, code, data):
        pairs = [("code", code), ("message", ERRORS[code])]
        if data is not None:
            pairs.append(("data", data))
        self._answer('"error":' + text(pairs), id_)

    def _next(self):
        """Begin the next line, if there is one to send."""
        if self._queue:
            if not self._line.begin_text(self._queue.pop(0)):
                self.dropped += 1
            return self._line.busy
        if self._again < self._again_end:
            n = self._again
            self._again += 1
            return self._begin(n)
        ring = self._ring
        if self._live < 0 or self._live >= ring.n:
            return False
        if self._live < ring.first:
            self._live = ring.first
        n = self._live
        self._live += 1
        return self._begin(n)

    def _begin(self, n):
        ring = self._ring
        if n < ring.first:
            return False  # written over while it waited
        if ring.kind(n) == SAMPLE:
            self._line.begin_sample(ring, n)
        else:
            self._line.begin_event(ring, n)
        return True
