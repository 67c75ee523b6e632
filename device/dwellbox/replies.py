"""Answers: written a few members a period, and waiting for the link, in buffers made once."""

from .codes import E_INTERNAL_ERROR, ERRORS
from .compat import const
from .encode import LINE, TAIL, members, text

_ROOM = LINE - TAIL
_ID_ROOM = const(41)  # a brace, the id's name, and its 16 letters, each of which may need a backslash
_HEAD = '{"jsonrpc":"2.0",'
_SLICE = const(4)  # members written in a period: 0.5 ms on the reference board


class Replies:
    """A queue of `size` answers, of which one may still be written; `waiting` are finished."""

    def __init__(self, size):
        """Make the buffers."""
        self.waiting = 0
        self._size = size
        self._first = 0
        self._buffers = [bytearray(LINE) for _ in range(size)]
        self._lengths = [0] * size
        self._length = 0
        self._pairs = None
        self._place = 0
        self._id = None

    def full(self):
        """Say whether no answer can be begun."""
        return self.waiting >= self._size

    def result(self, id_, pairs):
        """Begin to write a result; `write` goes on with it."""
        self._length = 0
        self._pairs = pairs
        self._place = 0
        self._id = id_
        self._add(_HEAD + '"result":{')

    def write(self):
        """Write some members more, then the end; say whether more is to come.

        A result that is no result, or does not fit, is answered as the defect it is.
        """
        place = self._place
        try:
            more = place + _SLICE < len(self._pairs)
            words = ("," if place else "") + members(self._pairs[place : place + _SLICE])
        except Exception as error:
            self.error(self._id, E_INTERNAL_ERROR, repr(error)[:60])
            return False
        self._place = place + _SLICE
        if self._add(words) and (more or self._finish("}")):
            return more
        self.error(self._id, E_INTERNAL_ERROR, "answer too long")
        return False

    def error(self, id_, code, data):
        """Write an error whole; without its data when they do not fit."""
        pairs = [("code", code), ("message", ERRORS[code])]
        self._length = 0
        self._id = id_
        self._add(_HEAD + '"error":{' + members(pairs))
        if data is not None:
            words = ',"data":' + text(data)
            if self._length + len(words.encode()) <= _ROOM - _ID_ROOM:
                self._add(words)
        self._finish("}")

    def _finish(self, end):
        self._pairs = None
        if not self._add(end + ',"id":' + text(self._id)):
            return False
        self._lengths[self._slot()] = self._length
        self.waiting += 1
        return True

    def _add(self, words):
        data = words.encode()
        end = self._length + len(data)
        if end > _ROOM:
            return False
        self._buffers[self._slot()][self._length : end] = data
        self._length = end
        return True

    def _slot(self):
        return (self._first + self.waiting) % self._size

    def hand(self, line):
        """Hand the oldest answer to the line, which copies it."""
        first = self._first
        line.begin_data(self._buffers[first], self._lengths[first])
        self._first = (first + 1) % self._size
        self.waiting -= 1
