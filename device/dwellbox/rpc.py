"""A line that came in, judged: checksum, JSON, request, method, parameters. Nothing is executed here.

Order, first failure answers: too long, checksum wrong, not JSON, not a request, no such method, checksum missing where one is
needed, parameters. A checksum that is present and wrong is never looked behind.
"""

from .codes import (
    E_BAD_CRC,
    E_CRC_REQUIRED,
    E_INVALID_PARAMS,
    E_INVALID_REQUEST,
    E_METHOD_NOT_FOUND,
    E_PARSE_ERROR,
)
from .compat import const, hex_crc

_CRC_LENGTH = const(18)  # ,"crc":"xxxxxxxx"}
_CRC_HEAD = b',"crc":"'
_CRC_END = b'"}'
_digits = bytearray(8)
_ID_MOST = const(0x3FFFFFFF)
_ID_LETTERS = const(16)
_MS_MOST = const(0x3FFFFFFF)

NO_ID = object()

# What a person may type by hand, without a checksum: asking and stopping.
BY_HAND = ("hello", "status", "abort")

# method: ((parameter, kind, least, most, required), ...); for "text" least and most bound its length
PARAMS = {
    "hello": (),
    "status": (),
    "keepalive": (),
    "finish": (),
    "abort": (),
    "maintenance": (),
    "acknowledge": (("shorted", bool, 0, 0, False),),
    "samples": (("from", int, 0, _MS_MOST, True), ("count", int, 1, 256, False)),
    "settings": (
        ("of", str, 1, 16, False),
        ("page", int, 0, 63, False),
        ("pages", int, 1, 64, False),
        ("text", str, 0, 240, False),
    ),
    "run": (
        ("run_key", str, 1, 16, True),
        ("volts_mv", int, 0, 1000000, True),
        ("dwell_ms", int, 0, _MS_MOST, True),
        ("expect_pf", int, 0, 10**9, False),
        ("low_pct", int, 0, 100, False),
        ("high_pct", int, 0, 10000, False),
        ("polar", bool, 0, 0, False),
        ("ceiling_ua", int, 0, 2000, False),
        ("bleed_ms", int, 0, _MS_MOST, False),
        ("recovery_ms", int, 0, _MS_MOST, False),
        ("nudge", bool, 0, 0, False),
        ("fixture", bool, 0, 0, False),
    ),
}


class Request:
    """A request that may be executed, or the error that answers it."""

    def __init__(self):
        """Start empty."""
        self.error = 0
        self.data = None
        self.id = NO_ID
        self.method = None
        self.params = None
        self.crc_ok = False


def crc_of(buffer, length):
    """Say what the checksum at the end of a line is: True right, False wrong, None not there."""
    start = length - _CRC_LENGTH
    if start < 1 or buffer[start : start + 8] != _CRC_HEAD or buffer[length - 2 : length] != _CRC_END:
        return None
    hex_crc(buffer, start, _digits, 0)
    return buffer[start + 8 : length - 2] == _digits


def judge(buffer, length, scanner):
    """Return the Request that a whole line makes; `scanner` has been fed every byte of it. Allocates."""
    request = Request()
    right = crc_of(buffer, length)
    if right is False:
        return _refuse(request, E_BAD_CRC, None)
    request.crc_ok = right is True
    if not scanner.finish():
        return _refuse(request, E_PARSE_ERROR, None)
    root = scanner.value
    if not isinstance(root, dict):
        return _refuse(request, E_INVALID_REQUEST, "one object a line")
    if "crc" in root and right is None:
        return _refuse(request, E_BAD_CRC, None)
    if scanner.twice:
        return _refuse(request, E_INVALID_REQUEST, "a member stands twice")
    return _request(request, root)


def _refuse(request, error, data):
    request.error = error
    request.data = data
    return request


def _request(request, root):
    if "id" in root:
        if not _good_id(root["id"]):
            return _refuse(request, E_INVALID_REQUEST, "id")
        request.id = root["id"]
    method = root.get("method")
    if root.get("jsonrpc") != "2.0" or not isinstance(method, str):
        request.id = NO_ID  # an invalid request is answered with id null
        return _refuse(request, E_INVALID_REQUEST, "jsonrpc" if isinstance(method, str) else "method")
    params = root.get("params", {})
    if not isinstance(params, (dict, list)):
        request.id = NO_ID
        return _refuse(request, E_INVALID_REQUEST, "params")
    request.method = method
    if method not in PARAMS:
        return _refuse(request, E_METHOD_NOT_FOUND, None)
    if not request.crc_ok and method not in BY_HAND:
        return _refuse(request, E_CRC_REQUIRED, None)
    if isinstance(params, list):
        return _refuse(request, E_INVALID_PARAMS, "by name only")
    return _check(request, params)


def _good_id(value):
    if isinstance(value, bool):
        return False
    if isinstance(value, int):
        return 0 <= value <= _ID_MOST
    if isinstance(value, str) and 0 < len(value) <= _ID_LETTERS:
        for letter in value:
            if not 32 <= ord(letter) < 127:
                return False
        return True
    return False


def _check(request, params):
    """Check each parameter by the table; what is unknown is left out."""
    checked = {}
    for name, kind, least, most, required in PARAMS[request.method]:
        if name not in params:
            if required:
                return _refuse(request, E_INVALID_PARAMS, name)
            continue
        value = params[name]
        if type(value) is not kind:
            return _refuse(request, E_INVALID_PARAMS, name)
        size = value if kind is int else len(value) if kind is str else 0
        if not least <= size <= most:
            return _refuse(request, E_INVALID_PARAMS, name)
        checked[name] = value
    request.params = checked
    return request
