"""Settings and calibration by pages: read back as written, written only in order and whole, each page fit for a line."""

from __future__ import annotations

import json
from types import SimpleNamespace
from typing import Any

import pytest

from dwellbench import assets
from dwellbox.answers import Pages
from dwellbox.codes import E_INVALID_PARAMS, E_LID_MUST_BE_OPEN, E_NOT_NOW, E_SETTINGS, REST, STATES
from dwellbox.encode import LINE, text
from dwellbox.interlock import LID_OPEN
from dwellbox.wire import Refusal

REFERENCE = json.loads((assets.device() / "reference_box.json").read_text(encoding="utf-8"))
GOOD = '{"volts_mv":400000}'


class Flash:
    """Only what is kept."""

    def __init__(self) -> None:
        self.data: dict[str, bytes] = {}

    def keep(self, name: str, data: bytes) -> None:
        self.data[name] = data

    def kept(self, name: str) -> bytes | None:
        return self.data.get(name)


class Box(SimpleNamespace):
    """What the pages ask of the controller."""

    def settings_changed(self) -> None:
        self.changed += 1


@pytest.fixture
def box() -> Box:
    course, conditions = SimpleNamespace(state=REST), SimpleNamespace(bits=LID_OPEN)
    return Box(board=Flash(), reference=REFERENCE, course=course, conditions=conditions, changed=0)


def write(pages: Pages, of: str, whole: str, size: int = 100) -> list[dict[str, Any]]:
    cut = [whole[at : at + size] for at in range(0, len(whole), size)] or [""]
    return [
        dict(pages.answer({"of": of, "page": k, "pages": len(cut), "text": part}))
        for k, part in enumerate(cut)
    ]


def read(pages: Pages, of: str) -> str:
    first = dict(pages.answer({"of": of}))
    rest = [dict(pages.answer({"of": of, "page": k}))["text"] for k in range(1, first["pages"])]
    return "".join([first["text"], *rest])


def refused(asked: Pages, /, **params: Any) -> tuple[int, Any]:
    with pytest.raises(Refusal) as caught:
        asked.answer(params)
    return caught.value.code, caught.value.data


@pytest.mark.parametrize("size", [1, 7, 100, 240])
def test_settings_read_back_as_written(box: Box, size: int) -> None:
    pages = Pages(box)
    answers = write(pages, "settings", GOOD, size)
    assert [answer["page"] for answer in answers] == list(range(len(answers)))
    assert read(pages, "settings") == GOOD
    assert box.changed == 1, "taken up once, at the last page"


def test_a_calibration_of_any_shape_reads_back(box: Box) -> None:
    pages = Pages(box)
    whole = json.dumps(
        {"volts": [{"range_mv": k, "per_code": k / 7} for k in range(30)]}, separators=(",", ":")
    )
    write(pages, "calibration", whole)
    assert read(pages, "calibration") == whole


def test_what_was_never_written_is_one_empty_page(box: Box) -> None:
    assert dict(Pages(box).answer({})) == {"of": "settings", "page": 0, "pages": 1, "text": ""}
    assert refused(Pages(box), page=1) == (E_INVALID_PARAMS, "page")


def test_of_is_one_of_two(box: Box) -> None:
    assert refused(Pages(box), of="latch") == (E_INVALID_PARAMS, "of")
    assert refused(Pages(box), of="latch", text="x") == (E_INVALID_PARAMS, "of")


def test_every_page_fits_a_line_even_of_nothing_but_quotes(box: Box) -> None:
    pages = Pages(box)
    whole = json.dumps('"' * 500)
    write(pages, "calibration", whole)
    assert read(pages, "calibration") == whole
    longest_id = '"' * 16
    for page in range(dict(pages.answer({"of": "calibration"}))["pages"]):
        result = text(pages.answer({"of": "calibration", "page": page}))
        line = '{"jsonrpc":"2.0","result":' + result + ',"id":' + text(longest_id) + ',"crc":"00000000"}\n'
        assert len(line) <= LINE


@pytest.mark.parametrize("state", [state for state in range(len(STATES)) if state != REST])
def test_written_only_at_rest(box: Box, state: int) -> None:
    box.course.state = state
    assert refused(Pages(box), text=GOOD)[0] == E_NOT_NOW


def test_written_only_with_the_lid_open(box: Box) -> None:
    box.conditions.bits = 0
    assert refused(Pages(box), text=GOOD)[0] == E_LID_MUST_BE_OPEN


@pytest.mark.parametrize(
    ("pages_sent", "why"),
    [
        ([{"page": 1, "pages": 2}], "the first is missing"),
        ([{"page": 0, "pages": 3}, {"page": 2, "pages": 3}], "one is missing"),
        ([{"page": 0, "pages": 3}, {"page": 1, "pages": 3, "of": "calibration"}], "another text"),
        ([{"page": 0, "pages": 2}, {"page": 1, "pages": 1}], "more pages than there are"),
        ([{"page": 0, "pages": 3}, {"page": 1, "pages": 2}], "fewer pages than were promised"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_pages_out_of_order_are_refused_and_nothing_is_stored(
    box: Box, pages_sent: list[dict[str, Any]], why: str
) -> None:
    pages = Pages(box)
    for sent in pages_sent[:-1]:
        pages.answer({"text": "{", **sent})
    assert refused(pages, text="}", **pages_sent[-1]) == (E_SETTINGS, "pages out of order"), why
    assert box.board.data == {}


def test_page_nought_begins_anew(box: Box) -> None:
    pages = Pages(box)
    pages.answer({"page": 0, "pages": 2, "text": "rubbish"})
    write(pages, "settings", GOOD, 10)
    assert read(pages, "settings") == GOOD


@pytest.mark.parametrize(
    ("whole", "why"),
    [
        ("{", "not JSON"),
        ("[1]", "settings are not an object"),
        ('{"volts_mv":700000}', "volts_mv is outside 1000 to 650000"),
        ('{"volts_mv":true}', "volts_mv is not a whole number"),
        ('{"colour":1}', "unknown setting colour"),
        ('{"volts_mv":\n400000}', "not plain ASCII"),
        ('{"\u00e9":1}', "not plain ASCII"),
    ],
)
def test_settings_that_do_not_fit_are_refused_with_the_reason(box: Box, whole: str, why: str) -> None:
    assert refused(Pages(box), text=whole) == (E_SETTINGS, why)
    assert box.board.data == {}
    assert box.changed == 0


def test_more_than_can_be_read_back_is_refused(box: Box) -> None:
    pages = Pages(box)
    whole = '"' + "x" * (180 * 64 - 2) + '"'
    write(pages, "calibration", whole, 240)
    assert read(pages, "calibration") == whole
    assert dict(pages.answer({"of": "calibration"}))["pages"] == 64
    with pytest.raises(Refusal, match="too long"):
        write(pages, "calibration", whole[:-1] + 'x"', 240)
    assert read(pages, "calibration") == whole
