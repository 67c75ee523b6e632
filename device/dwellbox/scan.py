"""A strict JSON scanner that takes one byte at a time (RFC 8259), since MicroPython's own accepts much that is not JSON.

It builds the value as it goes, so that a line costs a bounded time in each period and is complete when its last byte has come.
Whole numbers come as int, any other number as the marker NOT_WHOLE, for nothing on this wire is a fraction. Refused beyond the
standard, because nothing here needs it: a member twice in one object, more than six levels, whole numbers of more than fifteen
digits (NOT_WHOLE).
"""

from .compat import const
from .numeral import FRACTION, GRAMMAR, INT, KIND, KINDS, POWER, ZERO

_VALUE = const(0)
_FIRST_KEY = const(1)
_KEY = const(2)
_COLON = const(3)
_AFTER = const(4)
_FIRST_ITEM = const(5)
_END = const(6)  # up to here between the tokens, where white space may stand
_STRING = const(7)
_ESCAPE = const(8)
_HEX = const(9)
_NUMBER = const(10)
_WORD = const(11)
_BAD = const(12)
_CONTINUED = const(13)  # within a UTF-8 sequence
_HALF = const(14)  # after the first half of a surrogate pair

_DEPTH = const(6)
_DIGITS = const(15)
_TEXT = const(512)  # longer than a line can be

_SPACE = b" \t\r\n"
# Bytes that are themselves in a string, most of what comes: ASCII but for controls, quotation mark and backslash.
_PLAIN = bytes([32 <= byte < 128 and byte != 34 and byte != 92 for byte in range(256)])

_WORDS = {116: (b"true", True), 102: (b"false", False), 110: (b"null", None)}
_ESCAPES = {34: 34, 92: 92, 47: 47, 98: 8, 102: 12, 110: 10, 114: 13, 116: 9}


class NotWhole:
    """Stands for a number that is not a whole one of at most fifteen digits."""

    def __repr__(self):
        return "a number that is not whole"


NOT_WHOLE = NotWhole()


class Scanner:
    """Feed it bytes; then `finish()` says whether one whole value has come, which is `value`."""

    def __init__(self):
        """Start with nothing."""
        self._text = bytearray(_TEXT)
        self.begin()

    def begin(self):
        """Start a new line."""
        self.value = None
        self.twice = False  # a member stood twice
        self._state = _VALUE
        self._stack = []
        self._keys = []
        self._key = None
        self._is_key = False
        self._length = 0
        self._unit = 0
        self._left = 0
        self._high = 0
        self._more = 0
        self._grammar = 0
        self._digits = 0
        self._number = 0
        self._minus = False

    def finish(self):
        """Say whether exactly one whole value has come."""
        if self._state == _NUMBER:
            self._end_number()
        return self._state == _END

    def feed(self, byte):
        """Take one byte."""
        state = self._state
        if state == _STRING:
            length = self._length
            if (
                _PLAIN[byte] and length < _TEXT
            ):  # nearly always; here rather than in a method, which would cost as much again
                self._text[length] = byte
                self._length = length + 1
            else:
                self._in_string(byte)
        elif state <= _END:
            if byte > 32:
                self._between(byte, state)
            elif byte not in _SPACE:
                self._state = _BAD
        elif state == _NUMBER:
            self._in_number(byte)
        elif state == _WORD:
            self._in_word(byte)
        elif state == _ESCAPE:
            self._in_escape(byte)
        elif state == _HEX:
            self._in_hex(byte)
        elif state == _CONTINUED:
            self._in_sequence(byte)
        elif state == _HALF:
            self._state = _ESCAPE if byte == 92 else _BAD

    # ---- structure

    def _between(self, byte, state):
        if state == _COLON:
            self._state = _VALUE if byte == 58 else _BAD
        elif state == _AFTER:
            self._after(byte)
        elif state == _VALUE or (state == _FIRST_ITEM and byte != 93):
            self._begin_value(byte)
        elif state == _FIRST_ITEM or (state == _FIRST_KEY and byte == 125):
            self._close()
        elif state in (_KEY, _FIRST_KEY) and byte == 34:
            self._begin_string(True)
        else:
            self._state = _BAD

    def _begin_value(self, byte):
        if byte == 34:
            self._begin_string(False)
        elif byte == 123:
            self._open({}, _FIRST_KEY)
        elif byte == 91:
            self._open([], _FIRST_ITEM)
        elif byte == 45 or 48 <= byte <= 57:
            self._begin_number(byte)
        elif byte in _WORDS:
            self._state = _WORD
            self._unit = byte
            self._length = 1
        else:
            self._state = _BAD

    def _open(self, container, state):
        if len(self._stack) >= _DEPTH:
            self._state = _BAD
            return
        self._stack.append(container)
        self._keys.append(self._key)
        self._state = state

    def _close(self):
        container = self._stack.pop()
        self._key = self._keys.pop()
        self._put(container)

    def _after(self, byte):
        is_object = isinstance(self._stack[-1], dict)
        if byte == 44:
            self._state = _KEY if is_object else _VALUE
        elif byte == (125 if is_object else 93):
            self._close()
        else:
            self._state = _BAD

    def _put(self, value):
        """A value is whole: it goes where it belongs."""
        if not self._stack:
            self.value = value
            self._state = _END
            return
        top = self._stack[-1]
        if isinstance(top, dict):
            if self._key in top:
                self.twice = True
            top[self._key] = value
        else:
            top.append(value)
        self._state = _AFTER

    # ---- words and numbers

    def _in_word(self, byte):
        word, value = _WORDS[self._unit]
        if byte != word[self._length]:
            self._state = _BAD
            return
        self._length += 1
        if self._length == len(word):
            self._put(value)

    def _begin_number(self, byte):
        self._state = _NUMBER
        self._grammar = 0
        self._digits = 0
        self._number = 0
        self._minus = byte == 45
        if not self._minus:
            self._in_number(byte)

    def _in_number(self, byte):
        kind = KIND[byte]
        after = GRAMMAR[self._grammar * KINDS + kind]
        if after:
            self._grammar = after
            if after <= INT:
                digits = self._digits
                self._digits = digits + 1
                if digits < _DIGITS:
                    self._number = self._number * 10 + byte - 48
        elif kind:
            self._state = _BAD
        else:
            self._end_number()
            if self._state != _BAD:
                self.feed(byte)

    def _end_number(self):
        grammar = self._grammar
        if grammar in (ZERO, INT):
            if self._digits > _DIGITS:
                self._put(NOT_WHOLE)
            else:
                self._put(-self._number if self._minus else self._number)
        elif grammar in (FRACTION, POWER):
            self._put(NOT_WHOLE)
        else:
            self._state = _BAD

    # ---- strings

    def _begin_string(self, is_key):
        self._state = _STRING
        self._is_key = is_key
        self._length = 0
        self._more = 0
        self._high = 0

    def _in_string(self, byte):
        """A byte that is not itself."""
        if byte == 34:
            self._end_string()
        elif byte == 92:
            self._state = _ESCAPE
        elif byte < 128:
            self._state = _BAD  # a control character, or too long
        else:
            self._lead(byte)

    def _in_sequence(self, byte):
        """A byte after the first of a UTF-8 sequence."""
        if not self._low <= byte <= self._most:
            self._state = _BAD
            return
        self._low = 0x80
        self._most = 0xBF
        self._more -= 1
        if not self._more:
            self._state = _STRING
        self._add(byte)

    def _lead(self, byte):
        """The first byte of a UTF-8 sequence, with the bounds of its second (RFC 3629)."""
        self._low = 0x80
        self._most = 0xBF
        if 0xC2 <= byte <= 0xDF:
            self._more = 1
        elif 0xE0 <= byte <= 0xEF:
            self._more = 2
            if byte == 0xE0:
                self._low = 0xA0
            elif byte == 0xED:
                self._most = 0x9F
        elif 0xF0 <= byte <= 0xF4:
            self._more = 3
            if byte == 0xF0:
                self._low = 0x90
            elif byte == 0xF4:
                self._most = 0x8F
        else:
            self._state = _BAD
            return
        self._state = _CONTINUED
        self._add(byte)

    def _in_escape(self, byte):
        if byte == 117:
            self._state = _HEX
            self._unit = 0
            self._left = 4
        elif byte in _ESCAPES and not self._high:
            self._state = _STRING
            self._add(_ESCAPES[byte])
        else:
            self._state = _BAD

    def _in_hex(self, byte):
        if 48 <= byte <= 57:
            digit = byte - 48
        elif 97 <= byte | 32 <= 102:
            digit = (byte | 32) - 87
        else:
            self._state = _BAD
            return
        self._unit = self._unit << 4 | digit
        self._left -= 1
        if not self._left:
            self._state = _STRING
            self._point(self._unit)

    def _point(self, unit):
        """A \\u escape is whole; surrogates only in pairs."""
        high = self._high
        if high:
            self._high = 0
            if 0xDC00 <= unit <= 0xDFFF:
                self._add_point(0x10000 + (high - 0xD800 << 10) + unit - 0xDC00)
            else:
                self._state = _BAD
        elif 0xD800 <= unit <= 0xDBFF:
            self._high = unit
            self._state = _HALF
        elif 0xDC00 <= unit <= 0xDFFF:
            self._state = _BAD
        else:
            self._add_point(unit)

    def _add_point(self, point):
        for byte in chr(point).encode():
            self._add(byte)

    def _add(self, byte):
        if self._length < _TEXT:
            self._text[self._length] = byte
            self._length += 1
        else:
            self._state = _BAD

    def _end_string(self):
        text = bytes(self._text[: self._length]).decode()
        if self._is_key:
            self._key = text
            self._state = _COLON
        else:
            self._put(text)
