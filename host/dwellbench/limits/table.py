"""The limits, as data. Order matters: of the rows that hold for a part, the first that `rules` decides.

Where a sourced and an unsourced figure rival, the sourced one rules. Sources are named as what they are: a
data sheet, a text that quotes a standard, common practice, memory. Names of makers stand here only as the
source of a figure.
"""

from __future__ import annotations

from dwellbench.limits.limit import (
    COMMON,
    DATA_SHEET,
    HANDBOOK,
    INSULATION,
    MEMORY,
    TOTAL_CURRENT,
    UNSURE,
    Limit,
)
from dwellbench.part import Part

_AL = ("electrolytic",)
_NEW, _PERIOD, _AGED, _ANY = ("new",), ("period",), ("aged",), ("new", "period", "aged")
_PET = ("polyester", "polycarbonate", "film")
_PP = ("polypropylene",)
_INF = float("inf")


def _current(
    id: str,
    shape: str,
    k: float,
    floor_uA: float,
    grades: tuple[str, ...],
    time_s: float,
    source: str,
    status: str,
    *,
    rules: bool = False,
    volts: tuple[float, float] = (0.0, _INF),
    farads: tuple[float, float] = (0.0, _INF),
    dielectrics: tuple[str, ...] = _AL,
) -> Limit:
    return Limit(
        id,
        TOTAL_CURRENT,
        shape,
        (k, floor_uA),
        dielectrics,
        grades,
        time_s,
        source,
        status,
        rules,
        volts,
        farads,
    )


def _insulation(
    id: str,
    mohm: float | None,
    mohm_uF: float | None,
    dielectrics: tuple[str, ...],
    grades: tuple[str, ...],
    source: str,
    status: str,
    *,
    rules: bool = False,
    time_s: float = 60.0,
    farads: tuple[float, float] = (0.0, _INF),
) -> Limit:
    numbers = (mohm, mohm_uF)
    return Limit(
        id, INSULATION, "less", numbers, dielectrics, grades, time_s, source, status, rules, farads=farads
    )


_A1 = "general radial series: the greater of 0.01 C V and 3 uA after 2 min; four makers' sheets as quoted on itecnotes.com"
_JAN = "JAN-C-62: k C + 0.3 mA, as quoted in amradio mailing list, message 21215"
_SHELF = "twice the new limit after the shelf test of IEC 60384-4, as stated in data sheets (Vishay 28375, 28327, 28340)"
_TENTH = "a tenth of the typical figure of the table of dielectrics on wima.de"

_ELECTROLYTIC = (
    _current("al_new", "greater", 0.01, 3.0, _NEW, 120.0, _A1, DATA_SHEET, rules=True),
    _current(
        "jan_c_62_100V",
        "by_capacitance",
        10.0,
        300.0,
        _PERIOD,
        300.0,
        _JAN,
        HANDBOOK,
        rules=True,
        volts=(0, 100),
    ),
    _current(
        "jan_c_62_250V",
        "by_capacitance",
        20.0,
        300.0,
        _PERIOD,
        300.0,
        _JAN,
        HANDBOOK,
        rules=True,
        volts=(100, 250),
    ),
    _current(
        "jan_c_62_350V",
        "by_capacitance",
        25.0,
        300.0,
        _PERIOD,
        300.0,
        _JAN,
        HANDBOOK,
        rules=True,
        volts=(250, 350),
    ),
    _current(
        "jan_c_62_450V",
        "by_capacitance",
        40.0,
        300.0,
        _PERIOD,
        300.0,
        _JAN,
        HANDBOOK,
        rules=True,
        volts=(350, 500),
    ),
    _current("al_aged", "greater", 0.02, 6.0, _AGED, 120.0, _SHELF, DATA_SHEET, rules=True),
    _current(
        "al_1min", "greater", 0.03, 4.0, _NEW, 60.0, "one-minute companion of the general formula", MEMORY
    ),
    _current(
        "al_high_volt",
        "plus",
        0.02,
        10.0,
        _NEW,
        120.0,
        "formula inferred from one catalogue line (KEMET ESL225M250: 2.2 uF 250 V, 21 uA)",
        MEMORY,
        volts=(100, _INF),
    ),
    _current(
        "al_large",
        "root",
        3.0,
        0.0,
        _ANY,
        300.0,
        "snap-in and screw types, 3 sqrt(C V) after 5 min",
        MEMORY,
        farads=(47e-6, _INF),
    ),
    _current("al_long_life", "plus", 0.002, 4.0, _NEW, 300.0, "European long-life types after 5 min", MEMORY),
    _current(
        "tantalum",
        "greater",
        0.01,
        0.5,
        _ANY,
        300.0,
        "0.01 C V is quoted in a web article; the floor of 0.5 uA is from memory of makers' sheets",
        MEMORY,
        rules=True,
        dielectrics=("tantalum",),
    ),
)

_FILM = (
    _insulation(
        "pp_new",
        1e5,
        3e4,
        _PP,
        _NEW,
        "KEMET R41 and EPCOS B32921 sheets: 100 Gohm, above 0.33 uF 30 000 s",
        DATA_SHEET,
        rules=True,
    ),
    _insulation(
        "pp_aged",
        5e4,
        1.5e4,
        _PP,
        ("period", "aged"),
        "half the delivered minimum after damp heat, KEMET, EPCOS and Vishay sheets",
        DATA_SHEET,
        rules=True,
    ),
    _insulation(
        "pp_dc_link", None, 1e4, _PP, _ANY, "Vishay MKP1848 sheet: R C above 10 000 s after 1 min", DATA_SHEET
    ),
    _insulation("film_new", 1e3 / 0.33, 1e3, _PET, _NEW, f"polyester: {_TENTH}", COMMON, rules=True),
    _insulation(
        "film_aged",
        500 / 0.33,
        500,
        _PET,
        ("period", "aged"),
        f"half of: polyester, {_TENTH}",
        COMMON,
        rules=True,
    ),
    _insulation(
        "pet_grade_1", 3e4, 1e4, ("polyester", "film"), _NEW, "IEC 60384-2 grade 1, above 100 V", UNSURE
    ),
    _insulation(
        "pet_grade_2", 7.5e3, 2.5e3, ("polyester", "film"), _NEW, "IEC 60384-2 grade 2, above 100 V", UNSURE
    ),
    _insulation(
        "ps_new", 1e4 / 0.33, 1e4, ("polystyrene",), _ANY, f"as polypropylene: {_TENTH}", COMMON, rules=True
    ),
)

_RS198 = "EIA RS-198 style leaded parts, KEMET C32x sheets: the less of {} Gohm and 100 Mohm uF"
_OTHER = (
    _insulation(
        "ceramic_new",
        1e4,
        100,
        ("ceramic_1", "ceramic_2"),
        _ANY,
        _RS198.format(10),
        DATA_SHEET,
        rules=True,
        time_s=120.0,
    ),
    _insulation(
        "ceramic_least",
        1e3,
        100,
        ("ceramic",),
        _ANY,
        _RS198.format(1) + " (Z5U)",
        DATA_SHEET,
        rules=True,
        time_s=120.0,
    ),
    _insulation(
        "mica_new",
        1e5,
        None,
        ("mica", "glass"),
        _NEW,
        "CDE dipped mica guide: above 100 Gohm to 10 nF",
        DATA_SHEET,
        rules=True,
        farads=(0.0, 1.0e-8),
    ),
    _insulation(
        "mica_large",
        None,
        1e3,
        ("mica", "glass"),
        _NEW,
        "MIL-PRF-39001: 1000 Mohm uF above 10 nF",
        MEMORY,
        rules=True,
        farads=(1.0e-8, _INF),
    ),
    _insulation(
        "mica_aged",
        7.5e3,
        None,
        ("mica", "glass"),
        ("period", "aged"),
        "CDE cylindrical mica sheet: 7 500 Mohm at 100 V",
        DATA_SHEET,
        rules=True,
    ),
    _insulation("vacuum", 1e5, None, ("vacuum",), _ANY, "as good as mica at the least", COMMON, rules=True),
    _insulation(
        "paper_visible",
        15.0,
        None,
        ("paper",),
        _ANY,
        "any leakage that an ohmmeter shows, 10 to 15 Mohm included, nostalgiaair.org",
        HANDBOOK,
        rules=True,
    ),
    _insulation(
        "paper_period",
        6e3,
        1.5e3,
        ("paper",),
        _ANY,
        "impregnated paper, least of the typical minima of MIL-C-25",
        UNSURE,
        rules=True,
    ),
)

LIMITS = (*_ELECTROLYTIC, *_FILM, *_OTHER)


def limits_for(part: Part, capacitance_F: float | None, grade: str) -> tuple[list[Limit], list[Limit]]:
    """The limits that decide on such a part and grade, and those that stand beside them.

    `capacitance_F` is the marked value, else the measured one. Paper has two that decide: one that may
    condemn, one that may only bless.
    """
    holding = [limit for limit in LIMITS if limit.holds_for(part, capacitance_F, grade)]
    ruling = [limit for limit in holding if limit.rules]
    return ruling, [limit for limit in holding if not limit.rules]
