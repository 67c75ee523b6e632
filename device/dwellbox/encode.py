"""What goes out: one line at a time, whole in a buffer made once, its checksum last, then sent a few bytes a period.

Lines of samples, ten a second, are written without touching the heap. The others are rare; their text is made on the heap and
copied, and nothing of it stays.
"""

from .codes import ENDS, FAULT_NONE, FAULTS, STAGES, STATES
from .compat import const, hex_crc, put_bytes, put_number
from .ring import DONE, FAULT, LOG, SAMPLE, STATE

LINE = const(512)  # bytes, the newline among them
TAIL = const(19)  # ,"crc":"xxxxxxxx"} and the newline
ASK_US = const(40)  # on the reference board: to ask it for room,
BYTE_US = const(72)  # and to put a byte
ROWS = const(3)  # of a line: at their longest (107 bytes each) they still fit

_SAMPLES = b'{"jsonrpc":"2.0","method":"samples","params":{"n":'
_ROWS_END = b"]}"
_CRC = b',"crc":"'
_END = b'"}\n'
_OPEN = const(91)
_CLOSE = const(93)
_COMMA = const(44)


class Line:
    """The line on its way out. `busy` until its last byte has been put; `send` only when it is not `open`."""

    def __init__(self, boot):
        """Take the number of this start of the box."""
        self.busy = False
        self.open = False  # rows are still to be written
        self.next_n = 0  # the event after the last one of the line
        self._row_n = 0
        self._boot = boot
        self._boot_rows = b',"boot":%d,"rows":[' % boot
        self._samples = bytearray(LINE)  # keeps its beginning, which is always the same
        self._other = bytearray(LINE)
        self._source = self._other
        self._length = put_bytes(self._samples, 0, _SAMPLES, len(_SAMPLES))
        self._sent = 0

    def begin_samples(self, ring, n, stop):
        """Begin the line of the sample `n` and of those that follow it, ROWS at most, before `stop`. Allocates nothing.

        Its first row is written now; `write_row` writes the others, one a period, for each costs half a millisecond.
        """
        last = n + ROWS
        if last > stop:
            last = stop
        self.next_n = n + 1
        while self.next_n < last and ring.kind(self.next_n) == SAMPLE:
            self.next_n += 1
        buffer = self._samples
        at = put_number(buffer, len(_SAMPLES), n)
        self._length = put_bytes(buffer, at, self._boot_rows, len(self._boot_rows))
        self._row_n = n
        self.busy = True
        self.open = True
        self.write_row(ring)

    def write_row(self, ring):
        """Write the next row, and after the last one the end of the line. Allocates nothing."""
        n = self._row_n
        buffer = self._samples
        at = self._length
        if n >= ring.first:
            if buffer[at - 1] == _CLOSE:
                buffer[at] = _COMMA
                at += 1
            buffer[at] = _OPEN
            at = ring.put_row(n, buffer, put_number(buffer, at + 1, n))
            buffer[at] = _CLOSE
            at += 1
        n += 1
        self._row_n = n
        self._length = at
        if n >= self.next_n:
            self._begin(buffer, put_bytes(buffer, at, _ROWS_END, 2))

    def begin_event(self, ring, n):
        """Write the line of an event that is not a sample. Allocates."""
        self.next_n = n + 1
        data = self._event(ring.kind(n), n, ring.note(n))
        self.begin_data(data, len(data))

    def _event(self, kind, n, note):
        """Return an event's notification, or a line for people that says why not."""
        if note is None:
            return self._notification("log", n, 0, [("text", "words no longer kept")])
        t, words = note
        try:
            method, pairs = _SAY[kind](words)
            data = self._notification(method, n, t, pairs)
        except Exception as error:  # our own defect: a word that is none. The stream goes on
            return self._notification("log", n, 0, [("text", "event unreadable: " + repr(error)[:60])])
        if len(data) > LINE - TAIL:
            return self._notification("log", n, t, [("text", "words too long: " + method)])
        return data

    def _notification(self, method, n, t, pairs):
        params = text([("n", n), ("boot", self._boot), ("t", t)] + pairs)
        return ('{"jsonrpc":"2.0","method":"' + method + '","params":' + params).encode()

    def begin_data(self, data, length):
        """Copy a line that lacks only its checksum and closing brace; it has at most LINE - TAIL bytes."""
        self._begin(self._other, put_bytes(self._other, 0, data, length))

    def _begin(self, buffer, length):
        """Close the line with its checksum."""
        at = put_bytes(buffer, length, _CRC, 8)
        hex_crc(buffer, length, buffer, at)
        self._length = put_bytes(buffer, at + 8, _END, 3)
        self._source = buffer
        self._sent = 0
        self.busy = True
        self.open = False

    def send(self, board, us):
        """Put bytes while the board has room, for about `us` microseconds; return how many. Allocates nothing."""
        source = self._source
        length = self._length
        start = sent = self._sent
        room = 0
        while us > 0 and sent < length:
            if room <= 0:
                room = board.room()
                if room <= 0:
                    break
                us -= ASK_US
            board.put(source[sent])
            sent += 1
            room -= 1
            us -= BYTE_US
        self._sent = sent
        if sent == length:
            self.busy = False
        return sent - start


def text(value):
    """Return a value as JSON text. A list of (name, value) tuples is an object, in that order. Allocates."""
    if value is None:
        return "null"
    if value is True:
        return "true"
    if value is False:
        return "false"
    if isinstance(value, int):
        return str(value)
    if isinstance(value, str):
        return quoted(value)
    if value and isinstance(value[0], tuple):
        return "{" + members(value) + "}"
    return "[" + ",".join([text(inner) for inner in value]) + "]"


def members(pairs):
    """Return (name, value) tuples as the members of an object, without its braces. Names are this firmware's own and plain."""
    return ",".join(['"' + name + '":' + text(value) for name, value in pairs])


def quoted(words):
    """Return a JSON string. What needs escaping is found and replaced by the interpreter's own loops, which cost little."""
    if "\\" in words:
        words = words.replace("\\", "\\\\")
    if '"' in words:
        words = words.replace('"', '\\"')
    if words and min(words) < " ":
        words = "".join([letter if letter >= " " else "\\u%04x" % ord(letter) for letter in words])
    return '"' + words + '"'


def _state(words):
    state, stage, why = words
    return "state", [("state", STATES[state]), ("stage", STAGES[stage]), ("why", why)]


def _fault(words):
    fault, state, value = words
    return "fault", [("fault", FAULTS[fault]), ("state", STATES[state]), ("value", value)]


def _done(words):
    run, run_key, end, fault, extra = words
    name = None if fault == FAULT_NONE else FAULTS[fault]
    return "done", [("run", run), ("run_key", run_key), ("end", ENDS[end]), ("fault", name)] + extra


def _log(words):
    return "log", [("text", words[0])]


_SAY = {STATE: _state, FAULT: _fault, DONE: _done, LOG: _log}
