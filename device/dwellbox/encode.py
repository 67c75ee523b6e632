"""What goes out: one line at a time, written into a buffer made once and sent a few bytes a period.

A line is filled first, a few numbers a period, and then sent a byte at a time while the link has room, its checksum growing with
it; the checksum's member comes last. A sample line is filled without touching the heap. Other lines are rare and are filled whole.
"""

from .codes import ENDS, FAULT_NONE, FAULTS, STATES, STAGES
from .compat import const
from .crc import Crc
from .ring import DONE, FAULT, LOG, SAMPLE, STATE

LINE = const(512)
_TAIL = const(19)  # ,"crc":"xxxxxxxx"} and the newline
_FIELDS = const(18)  # numbers in a row, n included

_SAMPLES_HEAD = b'{"jsonrpc":"2.0","method":"samples","params":{"n":'
_BOOT = b',"boot":'
_ROWS = b',"rows":[['
_ROWS_END = b"]]}"
_CRC = b',"crc":"'
_DIGITS = bytearray(12)


class Line:
    """The line on its way out. `busy` until its last byte has been put."""

    def __init__(self, boot):
        """Take the number of this start of the box. `begin_sample` and `send` allocate nothing."""
        self.busy = False
        self._boot = boot
        self._buffer = bytearray(LINE)
        self._length = 0
        self._sent = 0
        self._crc = Crc()
        self._row = [0] * (_FIELDS - 1)
        self._field = _FIELDS  # next number of a sample to write; _FIELDS: the line is filled

    # ---- filling

    def begin_sample(self, ring, n):
        """Begin the line of a sample; `fill` goes on with it."""
        self._start()
        ring.row(n, self._row)
        self._raw(_SAMPLES_HEAD)
        self._number(n)
        self._raw(_BOOT)
        self._number(self._boot)
        self._raw(_ROWS)
        self._number(n)
        self._field = 1

    def fill(self, most):
        """Write up to `most` further numbers of a sample; say whether the line is filled."""
        field = self._field
        if field >= _FIELDS:
            return True
        row = self._row
        stop = field + most
        while field < _FIELDS and field < stop:
            self._byte(44)
            self._number(row[field - 1])
            field += 1
        self._field = field
        if field < _FIELDS:
            return False
        self._raw(_ROWS_END)
        return True

    def begin_event(self, ring, n):
        """Begin the line of any event; a sample's is not filled yet. Allocates, but for samples."""
        kind = ring.kind(n)
        if kind == SAMPLE:
            self.begin_sample(ring, n)
            return
        note = ring.note(n)
        if note is None:
            self.begin_text(self._notification("log", n, 0, [("text", "words no longer kept")]))
            return
        t, words = note
        method, pairs = _SAY[kind](words)
        self.begin_text(self._notification(method, n, t, pairs))

    def _notification(self, method, n, t, pairs):
        params = text([("n", n), ("boot", self._boot), ("t", t)] + pairs)
        return '{"jsonrpc":"2.0","method":"' + method + '","params":' + params

    def begin_text(self, whole):
        """Begin a line from a text that lacks only its checksum and closing brace; say whether it fits."""
        data = whole.encode()
        if len(data) + _TAIL > LINE:
            return False
        self._start()
        self._raw(data)
        self._field = _FIELDS
        return True

    def _start(self):
        self.busy = True
        self._length = 0
        self._sent = 0
        self._crc.begin()

    def _raw(self, data):
        buffer = self._buffer
        length = self._length
        for byte in data:
            buffer[length] = byte
            length += 1
        self._length = length

    def _byte(self, byte):
        self._buffer[self._length] = byte
        self._length += 1

    def _number(self, value):
        """Write a whole number of at most eleven digits."""
        if value < 0:
            self._byte(45)
            value = -value
        if value < 10:
            self._byte(48 + value)
            return
        count = 0
        digits = _DIGITS
        while value:
            rest = value // 10
            digits[count] = 48 + value - rest * 10
            value = rest
            count += 1
        while count:
            count -= 1
            self._byte(digits[count])

    # ---- sending

    def send(self, board, most):
        """Put up to `most` bytes while the board has room; return how many. The checksum's member follows by itself."""
        sent = self._sent
        length = self._length
        buffer = self._buffer
        crc = self._crc
        count = 0
        room = 0
        while count < most:
            if sent == length:
                if self._closing:
                    break
                self._close()
                length = self._length
            if room <= 0:
                room = board.room()
                if room <= 0:
                    break
            byte = buffer[sent]
            if not self._closing:
                crc.add(byte)
            board.put(byte)
            sent += 1
            count += 1
            room -= 1
        self._sent = sent
        if self._closing and sent == self._length:
            self._closing = False
            self.busy = False
        return count

    _closing = False

    def _close(self):
        """All members are out: add the checksum's."""
        self._closing = True
        self._raw(_CRC)
        self._crc.hex_into(self._buffer, self._length)
        self._length += 8
        self._raw(b'"}\n')


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
        return "{" + ",".join([quoted(name) + ":" + text(inner) for name, inner in value]) + "}"
    return "[" + ",".join([text(inner) for inner in value]) + "]"


def quoted(words):
    """Return a JSON string."""
    if '"' in words or "\\" in words or not _plain(words):
        words = "".join([_escaped(letter) for letter in words])
    return '"' + words + '"'


def _plain(words):
    for letter in words:
        if ord(letter) < 32:
            return False
    return True


def _escaped(letter):
    if letter == '"' or letter == "\\":
        return "\\" + letter
    return "\\u%04x" % ord(letter) if ord(letter) < 32 else letter


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
