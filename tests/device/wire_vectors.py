"""One list of vectors for each layer of the wire, read by CPython's tests and by MicroPython itself (`on_micropython.py`).

Only what both interpreters have.
"""

import binascii

# (bytes, CRC-32). The first two: the check value of the published CRC catalogues, and the empty message. The others are this
# project's lines, computed by zlib when the vectors are used (see test_crc), not taken on trust.
CRC = (
    (b"123456789", "cbf43926"),
    (b"", "00000000"),
    (b"\x00", "d202ef8d"),
    (b"\xff\xff\xff\xff", "ffffffff"),
    (b'{"jsonrpc":"2.0","id":1,"method":"hello","params":{}', "df3421d9"),
)

BAD = "bad"  # no JSON, or beyond what this wire takes
FRACTION = "fraction"  # a number that is not a whole one of at most fifteen digits

# (text, what comes of it); values are compared after FRACTION has taken the place of NOT_WHOLE
SCAN = (
    (b"0", 0),
    (b"-0", 0),
    (b"7", 7),
    (b"-12", -12),
    (b"1073741823", 1073741823),
    (b"999999999999999", 999999999999999),
    (b"1000000000000000", FRACTION),
    (b"0.5", FRACTION),
    (b"-0.0", FRACTION),
    (b"1e3", FRACTION),
    (b"1E+3", FRACTION),
    (b"2.5e-1", FRACTION),
    (b"01", BAD),
    (b"+1", BAD),
    (b"-", BAD),
    (b"1.", BAD),
    (b".5", BAD),
    (b"1e", BAD),
    (b"1e+", BAD),
    (b"0x1", BAD),
    (b"1 2", BAD),
    (b"NaN", BAD),
    (b"Infinity", BAD),
    (b"-Infinity", BAD),
    (b"true", True),
    (b"false", False),
    (b"null", None),
    (b"True", BAD),
    (b"tru", BAD),
    (b"nulll", BAD),
    (b'""', ""),
    (b'"a"', "a"),
    (b'"\\"\\\\\\/\\b\\f\\n\\r\\t"', '"\\/\b\f\n\r\t'),
    (b'"\\u0041\\u00e9\\u20AC"', "A\u00e9\u20ac"),
    (b'"\\u0000"', "\x00"),
    (b'"\\ud83d\\ude00"', "\U0001f600"),
    (b'"\\ud83d"', BAD),
    (b'"\\ud83dx"', BAD),
    (b'"\\ud83d\\n"', BAD),
    (b'"\\ud83d\\u0041"', BAD),
    (b'"\\ude00"', BAD),
    (b'"\\u12g4"', BAD),
    (b'"\\u123"', BAD),
    (b'"\\x41"', BAD),
    (b'"\\', BAD),
    (b'"a', BAD),
    (b"'a'", BAD),
    (b'"\t"', BAD),
    (b'"\x7f"', "\x7f"),
    (b'"\xc3\xa9"', "\u00e9"),
    (b'"\xe2\x82\xac"', "\u20ac"),
    (b'"\xf0\x9f\x98\x80"', "\U0001f600"),
    (b'"\xc0\xaf"', BAD),  # overlong
    (b'"\xe0\x80\x80"', BAD),
    (b'"\xed\xa0\x80"', BAD),  # a surrogate in UTF-8
    (b'"\xf0\x80\x80\x80"', BAD),
    (b'"\xf4\x90\x80\x80"', BAD),  # beyond U+10FFFF
    (b'"\xff"', BAD),
    (b'"\x80"', BAD),
    (b'"\xc3"', BAD),
    (b'"\xc3\\n"', BAD),
    (b"\xef\xbb\xbf1", BAD),  # a byte order mark
    (b"[]", []),
    (b"[1,2]", [1, 2]),
    (b"[ 1 ,\t2 ]", [1, 2]),
    (b"[1,]", BAD),
    (b"[,]", BAD),
    (b"[1 2]", BAD),
    (b"[1,,2]", BAD),
    (b"[", BAD),
    (b"]", BAD),
    (b"[}", BAD),
    (b"{}", {}),
    (b'{"a":1}', {"a": 1}),
    (b' { "a" : [ true , null ] , "b" : { } } ', {"a": [True, None], "b": {}}),
    (b'{"a":1,}', BAD),
    (b'{"a" 1}', BAD),
    (b'{"a":}', BAD),
    (b'{"a"}', BAD),
    (b"{a:1}", BAD),
    (b"{1:2}", BAD),
    (b"{,}", BAD),
    (b'{"a":1', BAD),
    (b'{"a":1]', BAD),
    (b'{"a":1}}', BAD),
    (b"{}{}", BAD),
    (b"", BAD),
    (b"  ", BAD),
    (b"[[[[[[]]]]]]", [[[[[[]]]]]]),  # six levels
    (b"[[[[[[[]]]]]]]", BAD),  # seven
    (b"0\x00", BAD),
    (b"[1]\x00", BAD),
    (b"[1.5,-2,3e0]", [FRACTION, -2, FRACTION]),
)

# texts in which a member stands twice: JSON all the same, and told
TWICE = (b'{"a":1,"a":2}', b'[{"b":{"c":1,"c":1}}]', b'{"a":1,"\\u0061":2}')

# Whole numbers of up to 30 bits
NUMBERS = (0, 1, 9, 10, 99, 100, 101, 999999, 1000000, 1073741823, -1, -9, -10, -32768, -8355840, -1073741824)

# (value, its text); a list of pairs is an object in that order
ENCODE = (
    (None, "null"),
    (True, "true"),
    (False, "false"),
    (0, "0"),
    (-5, "-5"),
    (1073741823, "1073741823"),
    ("", '""'),
    ("plain", '"plain"'),
    ('a"b\\c', '"a\\"b\\\\c"'),
    ("\n\x1f", '"\\u000a\\u001f"'),
    ("\u00e9\u20ac", '"\u00e9\u20ac"'),
    ([], "[]"),
    ([1, 0], "[1,0]"),
    ([("b", 1), ("a", None)], '{"b":1,"a":null}'),
    ([("a", [("b", "c")])], '{"a":{"b":"c"}}'),
)

# Rows of the ring (17 numbers after n), extremes included
ROWS = (
    (0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0),
    (100, 6, 2, 1, 18, 288000, 15990, 16010, 20, -3, -4, 5, 0, 16384, 16390, 0, 0),
    (4000000, 11, 1, 0, 31, 1015777, -32768, 32767, 31, -1015808, -32768, 32767, 31, -32768, 32767, 15, 1),
)


def sealed(body):
    """Return a line, without its newline, from the text of an object that lacks its closing brace."""
    if isinstance(body, str):
        body = body.encode()
    return body + b',"crc":"%08x"}' % (binascii.crc32(body) & 0xFFFFFFFF)


def asked(method, params="{}", id_="1"):
    """Return the sealed line of a request."""
    return sealed(f'{{"jsonrpc":"2.0","id":{id_},"method":"{method}","params":{params}')


_RUN = '{"run_key":"k","volts_mv":250000,"dwell_ms":60000%s}'

# (line, error or 0, what explains it, the id that is answered or None)
JUDGE = (
    (asked("hello"), 0, None, 1),
    (asked("hello", id_='"a b"'), 0, None, "a b"),
    (asked("hello", id_="0"), 0, None, 0),
    (asked("hello", id_="1073741823"), 0, None, 1073741823),
    (asked("hello", id_='"sixteen letters."'), 0, None, "sixteen letters."),
    (sealed('{"jsonrpc":"2.0","method":"keepalive"'), 0, None, None),
    (sealed(' { "jsonrpc" : "2.0" , "method" : "status" , "id" : 4 '), 0, None, 4),
    (sealed('{"method":"status","id":4,"jsonrpc":"2.0","more":[1,{"a":null}]'), 0, None, 4),
    (asked("run", _RUN % ""), 0, None, 1),
    (asked("run", _RUN % ',"unknown":"left out"'), 0, None, 1),
    # by hand
    (b'{"jsonrpc":"2.0","id":1,"method":"hello"}', 0, None, 1),
    (b'{"jsonrpc":"2.0","id":1,"method":"status","params":{}}', 0, None, 1),
    (b'{"jsonrpc":"2.0","method":"abort"}', 0, None, None),
    (b'{"jsonrpc":"2.0","id":1,"method":"finish"}', -32002, None, 1),
    (b'{"jsonrpc":"2.0","id":1,"method":"run","params":[]}', -32002, None, 1),
    (b'{"jsonrpc":"2.0","method":"keepalive"}', -32002, None, None),
    # the checksum
    (asked("hello")[:-3] + b'g"}', -32000, None, None),
    (asked("hello").replace(b"hello", b"hellp"), -32000, None, None),
    (asked("hello").replace(b'"id":1', b'"id":2'), -32000, None, None),
    (b'{"jsonrpc":"2.0","id":1,"method":"hello","crc":"DF3421D9"}', -32000, None, None),
    (b'{"crc":"00000000","jsonrpc":"2.0","id":1,"method":"hello"}', -32000, None, None),
    (b'{"jsonrpc":"2.0","id":1,"method":"hello","crc":"0000000"}', -32000, None, None),
    (b'{"jsonrpc":"2.0","id":1,"method":"hello","crc":5}', -32000, None, None),
    (b'{"jsonrpc":"2.0","id":1,"method":"hello", "crc":"df3421d9"}', -32000, None, None),
    (asked("hello") + b" ", -32000, None, None),
    (b'not JSON at all,"crc":"00000000"}', -32000, None, None),
    (sealed("not JSON at all"), -32700, None, None),
    # JSON
    (b"hello", -32700, None, None),
    (b"{", -32700, None, None),
    (b"\xff\xfe\x00", -32700, None, None),
    (b'{"jsonrpc":"2.0","method":"hello","id":1}}', -32700, None, None),
    (b'{"jsonrpc":"2.0","id":01,"method":"hello"}', -32700, None, None),
    (b"[" * 7 + b"]" * 7, -32700, None, None),
    # requests
    (b"1", -32600, "one object a line", None),
    (b'"hello"', -32600, "one object a line", None),
    (b"null", -32600, "one object a line", None),
    (b"[]", -32600, "one object a line", None),
    (b'[{"jsonrpc":"2.0","id":1,"method":"hello"}]', -32600, "one object a line", None),
    (b"{}", -32600, "method", None),
    (b'{"jsonrpc":"2.0","id":1}', -32600, "method", None),
    (b'{"jsonrpc":"2.0","id":1,"method":5}', -32600, "method", None),
    (b'{"jsonrpc":"2.0","id":1,"method":null}', -32600, "method", None),
    (b'{"id":1,"method":"hello"}', -32600, "jsonrpc", None),
    (b'{"jsonrpc":"1.0","id":1,"method":"hello"}', -32600, "jsonrpc", None),
    (b'{"jsonrpc":2.0,"id":1,"method":"hello"}', -32600, "jsonrpc", None),
    (b'{"jsonrpc":"2.0","id":1,"method":"hello","params":1}', -32600, "params", None),
    (b'{"jsonrpc":"2.0","id":1,"method":"hello","params":null}', -32600, "params", None),
    (b'{"jsonrpc":"2.0","id":1,"id":2,"method":"hello"}', -32600, "a member stands twice", None),
    (asked("run", _RUN % ',"volts_mv":1'), -32600, "a member stands twice", None),
    (asked("hello", id_="null"), -32600, "id", None),
    (asked("hello", id_="true"), -32600, "id", None),
    (asked("hello", id_="-1"), -32600, "id", None),
    (asked("hello", id_="1.0"), -32600, "id", None),
    (asked("hello", id_="1073741824"), -32600, "id", None),
    (asked("hello", id_='""'), -32600, "id", None),
    (asked("hello", id_='"seventeen letters"'), -32600, "id", None),
    (asked("hello", id_='"\\u00e9"'), -32600, "id", None),
    (asked("hello", id_="[1]"), -32600, "id", None),
    # methods
    (asked("Hello"), -32601, None, 1),
    (asked(""), -32601, None, 1),
    (asked("rpc.discover", id_='"x"'), -32601, None, "x"),
    (b'{"jsonrpc":"2.0","id":1,"method":"nothing"}', -32601, None, 1),
    # parameters
    (asked("hello", "[]"), -32602, "by name only", 1),
    (asked("run", '["k",1,1]'), -32602, "by name only", 1),
    (asked("run"), -32602, "run_key", 1),
    (asked("run", _RUN % ',"nudge":1'), -32602, "nudge", 1),
    (asked("run", _RUN % ',"ceiling_ua":true'), -32602, "ceiling_ua", 1),
    (asked("run", _RUN % ',"expect_pf":1.0'), -32602, "expect_pf", 1),
    (asked("samples"), -32602, "from", 1),
    (asked("samples", '{"from":0,"count":0}'), -32602, "count", 1),
)
