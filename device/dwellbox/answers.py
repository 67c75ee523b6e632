"""What the box says of itself: the results of `hello`, `status` and `settings`, as pairs in the order they are sent."""

import json

from . import VERSION
from .codes import (
    E_INVALID_PARAMS,
    E_LID_MUST_BE_OPEN,
    E_NOT_NOW,
    E_SETTINGS,
    FAULT_NONE,
    FAULTS,
    REST,
    STAGES,
    STATES,
)
from .compat import const
from .interlock import HV, LID_OPEN, LID_UNSURE, STOP, UNLOCKED
from .ratings import check_settings
from .thermistor import temperature_mc
from .wire import Refusal

PROTOCOL = [1, 0]
# Letters of a page, each perhaps escaped: with the longest id the answer still fits a line of 512 bytes.
_PAGE = const(180)
_PAGES = const(64)


def hello(box):
    """Return who this is and what it may do."""
    ratings = box.ratings
    pairs = [
        ("protocol", PROTOCOL),
        ("firmware", VERSION),
        ("build", box.build),
        ("model", ratings.model),
        ("box", box.board.unique_id()),
        ("state", STATES[box.course.state]),
        ("boot", box.boot),
        ("n", box.ring.n),
        ("ratings", rating_pairs(ratings)),
        ("fault", fault_name(box)),
    ]
    emulation = box.board.emulation
    if emulation is not None:
        pairs.append(("time_scale", emulation["time_scale"]))
        pairs.append(("emulated", True))
    return pairs


def rating_pairs(ratings):
    """Return the ratings of this box, its own stricter settings included."""
    return [
        ("volts_mv", ratings.volts_mv),
        ("energy_mj", ratings.energy_mj),
        ("capacitance_nf", ratings.capacitance_nf),
        ("dwell_ms", ratings.dwell_ms),
    ]


def status(box):
    """Return what is on the part, whether it may be touched, and what is happening."""
    bits = box.conditions.bits
    front = box.front
    lid = "closed"
    if bits & LID_UNSURE:
        lid = "unsure"
    elif bits & LID_OPEN:
        lid = "open"
    return [
        ("state", STATES[box.course.state]),
        ("stage", STAGES[box.bench.stage]),
        ("safe", box.course.proof.proven and not box.course.latch.missing),
        ("energised", box.energised()),
        ("part_mv", front.part_mv),
        ("supply_mv", front.supply_mv),
        ("temp_mc", temperature_mc(front.temp_code)),
        ("lid", lid),
        ("locked", not bits & UNLOCKED),
        ("stop", bool(bits & STOP)),
        ("hv", bool(bits & HV)),
        ("fault", fault_name(box)),
        ("run", box.course.run),
        ("run_key", box.course.run_key),
        ("t", box.course.run_ms()),
        ("left_ms", box.course.left_ms()),
        ("n", box.ring.n),
        ("boot", box.boot),
        ("dropped", box.wire.dropped),
    ]


def fault_name(box):
    """Return the latched reason's name, the settings' problem, or None."""
    if box.course.latch.reason != FAULT_NONE:
        return FAULTS[box.course.latch.reason]
    return "settings" if box.ratings.problem else None


class Pages:
    """Settings and calibration, read and written page by page; written only at rest with the lid open."""

    def __init__(self, box):
        """Take the controller."""
        self._box = box
        self._of = None
        self._pages = 0
        self._parts = []

    def answer(self, params):
        """Answer a `settings` request."""
        of = params.get("of", "settings")
        if of not in ("settings", "calibration"):
            raise Refusal(E_INVALID_PARAMS, "of")
        if "text" in params:
            return self._write(of, params)
        return self._read(of, params.get("page", 0))

    def _read(self, of, page):
        data = self._box.board.kept(of)
        text = "" if data is None else bytes(data).decode()
        pages = max(1, (len(text) + _PAGE - 1) // _PAGE)
        if page >= pages:
            raise Refusal(E_INVALID_PARAMS, "page")
        return _pairs(of, page, pages, text[page * _PAGE : (page + 1) * _PAGE])

    def _write(self, of, params):
        box = self._box
        if box.course.state != REST:
            raise Refusal(E_NOT_NOW)
        if not box.conditions.bits & LID_OPEN:
            raise Refusal(E_LID_MUST_BE_OPEN)
        page = params.get("page", 0)
        pages = params.get("pages", 1)
        if page == 0:
            self._of = of
            self._pages = pages
            self._parts = []
        if of != self._of or pages != self._pages or page != len(self._parts) or page >= pages:
            raise Refusal(E_SETTINGS, "pages out of order")
        self._parts.append(params["text"])
        if page == pages - 1:
            self._store(of, "".join(self._parts))
            self._parts = []
        return _pairs(of, page, pages, "")

    def _store(self, of, text):
        box = self._box
        if len(text) > _PAGE * _PAGES:
            raise Refusal(E_SETTINGS, "too long")
        if not _plain(text):
            raise Refusal(E_SETTINGS, "not plain ASCII")
        try:
            value = json.loads(text)
        except ValueError:
            raise Refusal(E_SETTINGS, "not JSON")
        if of == "settings":
            problem = check_settings(box.reference, value)
            if problem:
                raise Refusal(E_SETTINGS, problem)
        box.board.keep(of, text.encode())
        box.settings_changed()


def _plain(text):
    """Say whether every letter is printable ASCII, so that a page of it has a known length on the wire."""
    for letter in text:
        if not 32 <= ord(letter) < 127:
            return False
    return True


def _pairs(of, page, pages, text):
    return [("of", of), ("page", page), ("pages", pages), ("text", text)]
