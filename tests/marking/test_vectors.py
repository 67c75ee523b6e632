"""Markings of the trade and what each must be read as: one table, fed to the parser, and the refusals with their readings."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dwellbench.errors import MarkingError
from dwellbench.part import Part

# marking: (farads, tolerance, volts, kind, test volts, dielectric, polar, sections)
READ: dict[str, tuple[object, ...]] = {
    "47n 630V film": (47e-9, None, 630, "dc", None, "film", False, ()),
    ".05 MFD 600 WVDC": (0.05e-6, None, 600, "dc", None, None, False, ()),
    "473K 630V": (47e-9, (-0.1, 0.1), 630, "dc", None, None, False, ()),
    "2A474J": (0.47e-6, (-0.05, 0.05), 100, "dc", None, None, False, ()),
    "473M 2J": (47e-9, (-0.2, 0.2), 630, "dc", None, None, False, ()),
    "104J400": (100e-9, (-0.05, 0.05), 400, "dc", None, None, False, ()),
    "103K1KV": (10e-9, (-0.1, 0.1), 1000, "dc", None, None, False, ()),
    "20 MFD 450V electrolytic": (20e-6, None, 450, "dc", None, "electrolytic", True, ()),
    "8 mfd 475 wkg 525 peak": (8e-6, None, 475, "dc", 525, None, False, ()),
    "16 MFD 450 V.W. 525 SURGE": (16e-6, None, 450, "dc", 525, None, False, ()),
    "0,5 MF 250/750 V": (0.5e-6, None, 250, "dc", 750, None, False, ()),
    "0.5 MF TEST 1500 V WKG 500": (0.5e-6, None, 500, "dc", 1500, None, False, ()),
    "0.5 MF WKG 500 TEST 1500": (0.5e-6, None, 500, "dc", 1500, None, False, ()),
    "0.1uF 500 VDC TEST 1500 VDC": (0.1e-6, None, 500, "dc", 1500, None, False, ()),
    "40+20+20 uF 450V": (None, None, 450, "dc", None, None, False, (40e-6, 20e-6, 20e-6)),
    "16/16 mfd 500V": (None, None, 500, "dc", None, None, False, (16e-6, 16e-6)),
    "2x50uF 450V": (None, None, 450, "dc", None, None, False, (50e-6, 50e-6)),
    "\u25a0 40 \u25b2 20 \u25cf 20 uF 450V": (
        None,
        None,
        450,
        "dc",
        None,
        None,
        False,
        (40e-6, 20e-6, 20e-6),
    ),
    "40uF 450V + 20uF 25V electrolytic": (None, None, 450, "dc", None, "electrolytic", True, (40e-6, 20e-6)),
    "1000 mmfd": (1e-9, None, None, None, None, None, False, ()),
    "100 uuF 500 WV": (100e-12, None, 500, "dc", None, None, False, ()),
    "500 cm 1000V mica": (555e-12, None, 1000, "dc", None, "mica", False, ()),
    "100pF GMV": (100e-12, (0.0, 1.0), None, None, None, None, False, ()),
    "0,1\u00b5 400": (0.1e-6, None, 400, "dc", None, None, False, ()),
    "0.1\u03bcF 400V": (0.1e-6, None, 400, "dc", None, None, False, ()),
    "0.1 uF": (0.1e-6, None, None, None, None, None, False, ()),
    "100n": (100e-9, None, None, None, None, None, False, ()),
    "100NF": (100e-9, None, None, None, None, None, False, ()),
    ".1/400V": (0.1e-6, None, 400, "dc", None, None, False, ()),
    "4n7J 400V": (4.7e-9, (-0.05, 0.05), 400, "dc", None, None, False, ()),
    "4p7": (4.7e-12, None, None, None, None, None, False, ()),
    "4R7": (4.7e-12, None, None, None, None, None, False, ()),
    "R47": (0.47e-12, None, None, None, None, None, False, ()),
    "478": (0.47e-12, None, None, None, None, None, False, ()),
    "479": (4.7e-12, None, None, None, None, None, False, ()),
    "475": (4.7e-6, None, None, None, None, None, False, ()),
    "5pF C": (5e-12, (-0.05, 0.05), None, None, None, None, False, ()),
    "330 J 500V": (33e-12, (-0.05, 0.05), 500, "dc", None, None, False, ()),
    "150nK 630V": (150e-9, (-0.1, 0.1), 630, "dc", None, None, False, ()),
    "0.01 uF +80-20% 1kV Z5U": (10e-9, (-0.2, 0.8), 1000, "dc", None, "ceramic_2", False, ()),
    "220pF NP0 500V": (220e-12, None, 500, "dc", None, "ceramic_1", False, ()),
    "0.1uF 275VAC X2": (0.1e-6, None, 275, "ac", None, None, False, ()),
    "1\u00b5F \u00b110% 250V~": (1e-6, (-0.1, 0.1), 250, "ac", None, None, False, ()),
    "0.1 \u00b5F 630 V DC / 220 V AC MKP": (0.1e-6, None, 630, "dc", None, "polypropylene", False, ()),
    "22uF 63V bipolar": (22e-6, None, 63, "dc", None, "electrolytic", False, ()),
    "1.0 uF 100V tant": (1e-6, None, 100, "dc", None, "tantalum", True, ()),
    ".02 MFD 400V paper": (0.02e-6, None, 400, "dc", None, "paper", False, ()),
    "82 mmf silver mica 500V": (82e-12, None, 500, "dc", None, "mica", False, ()),
    "2200 uF 35 V": (2200e-6, None, 35, "dc", None, None, False, ()),
    "10 nF 1.5kV ceramic": (10e-9, None, 1500, "dc", None, "ceramic", False, ()),
    "450V 20uF": (20e-6, None, 450, "dc", None, None, False, ()),
}

REFUSED: dict[str, tuple[str, ...]] = {
    ".05/600": ("0.05 uF 600 V", "0.05 uF TEST 600 V"),
    "50/50/275": ("50+50 uF 275 V", "50 uF 50 V TEST 275 V"),
    "32/32 450V": ("32+32 uF 450 V",),
    "8+8 350": ("8+8 uF 350 V", "8 uF 8 V TEST 350 V"),
    "220 500V": ("22 pF 500 V", "220 pF 500 V", "220 uF 500 V"),
    "10K 400V": ("10 nF 400 V", "10 pF 10% 400 V"),
    "477": ("477 pF",),
    "0.1uF 400V 600V": ("100 nF 400 V TEST 600 V", "100 nF 600 V"),
    "TEST 1500 V WKG 500": (),
    "10nF 22nF 400V": (),
    "film": (),
    "": (),
}


@pytest.mark.parametrize("marking", READ)
def test_read(marking: str) -> None:
    farads, tolerance, volts, kind, test_volts, dielectric, polar, sections = READ[marking]
    part = Part.parse(marking)
    assert part.capacitance_F == (None if farads is None else pytest.approx(farads, rel=1e-9))
    assert part.tolerance == (None if tolerance is None else pytest.approx(tolerance))
    assert (part.rated_V, part.rated_kind, part.test_V) == (volts, kind, test_volts)
    assert (part.dielectric, part.polar) == (dielectric, polar)
    assert [section.capacitance_F for section in part.sections] == pytest.approx(list(sections))  # type: ignore[call-overload]
    assert part.understood


@pytest.mark.parametrize("marking", REFUSED)
def test_refused_with_the_readings_to_choose_from(marking: str) -> None:
    with pytest.raises(MarkingError) as caught:
        Part.parse(marking)
    assert tuple(caught.value.readings) == REFUSED[marking]
    assert caught.value.message
    assert caught.value.remedy
    for reading in caught.value.readings:
        Part.parse(reading)


def test_sections_with_volts_of_their_own_keep_them() -> None:
    part = Part.parse("40uF 450V + 20uF 25V electrolytic")
    assert [section.rated_V for section in part.sections] == [450, 25]
    assert all(section.polar for section in part.sections)


def test_what_was_made_of_it_is_said() -> None:
    told = " ".join(Part.parse("8 MFD 475 wkg 525 peak").understood)
    assert "8 uF" in told
    assert "microfarads" in told
    assert "525 V is a test or surge voltage, not the rating" in told


def test_doubts_are_said() -> None:
    assert any("PCB" in doubt for doubt in Part.parse("0.25uF 600V oil").doubts)
    assert any("no unit" in doubt for doubt in Part.parse("0,1u 400").doubts)
    assert any("mains" in doubt for doubt in Part.parse("0.1uF 275VAC X2").doubts)
    assert any("not understood" in doubt for doubt in Part.parse("47n 630V film zzz").doubts)


def test_an_ac_rating_is_not_turned_into_dc() -> None:
    part = Part.parse("0.1uF 275VAC X2")
    assert (part.rated_V, part.rated_kind) == (275, "ac")


@given(st.text(max_size=60))
def test_any_text_is_read_or_refused_in_words(text: str) -> None:
    try:
        part = Part.parse(text)
    except MarkingError as error:
        assert error.message
        for reading in error.readings:
            Part.parse(reading)
    else:
        assert part.capacitance_F is not None or part.sections
        assert part.capacitance_F is None or part.capacitance_F > 0


PIECES = st.sampled_from(
    [
        "47",
        ".05",
        "0,1",
        "uF",
        "MFD",
        "n",
        "pF",
        "600",
        "V",
        "WVDC",
        "TEST",
        "WKG",
        "/",
        "+",
        "K",
        "473J",
        "2A",
        "film",
        "peak",
        "~",
        "%",
    ]
)


@given(st.lists(PIECES, min_size=1, max_size=8), st.sampled_from(["", " "]))
def test_any_heap_of_its_own_words_is_read_or_refused(pieces: list[str], between: str) -> None:
    try:
        part = Part.parse(between.join(pieces))
    except MarkingError as error:
        for reading in error.readings:
            Part.parse(reading)
    else:
        assert part.rated_V is None or part.rated_V > 0


@given(
    st.sampled_from([10, 15, 22, 33, 47, 68]),
    st.integers(0, 5),
    st.sampled_from([63, 100, 250, 400, 630]),
    st.sampled_from(["film", "paper", "mica", "ceramic", "polypropylene"]),
)
def test_what_is_written_is_what_is_read(figures: int, power: int, volts: int, kind: str) -> None:
    farads = figures * 10.0 ** (power - 12)
    for marking in (
        f"{figures}{power}K {volts}V {kind}" if power else f"{figures}pF {volts}V {kind}",
        f"{farads * 1e9:.6g}nF {kind} {volts} V",
    ):
        part = Part.parse(marking)
        assert part.capacitance_F == pytest.approx(farads)
        assert (part.rated_V, part.dielectric) == (volts, kind)


@pytest.mark.parametrize("volts", [450, 500, 630])
@pytest.mark.parametrize("word", ["test", "TEST", "peak", "surge", "proof"])
@pytest.mark.parametrize(
    "form",
    [
        "0.1uF {word} {volts}V",
        "0.1uF {volts}V {word}",
        "0.1uF 250V {word} {volts}",
        "0.1 MFD 250 WVDC {volts} {word}",
    ],
)
def test_a_test_voltage_is_never_the_rating(volts: int, word: str, form: str) -> None:
    part = Part.parse(form.format(volts=volts, word=word))
    assert part.rated_V in (None, 250)
    assert part.test_V == volts
