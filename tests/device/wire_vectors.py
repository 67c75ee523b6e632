"""One list of vectors for each layer of the wire, read by CPython's tests and by MicroPython itself (`on_micropython.py`).

Only what both interpreters have: plain literals.
"""

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
    (4000000, 11, 1, 0, 255, 8355585, -32768, 32767, 255, -8355840, -32768, 32767, 255, -32768, 32767, 15, 1),
)
