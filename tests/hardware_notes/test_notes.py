"""The notes agree with what firmware and emulator run on."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[2]
NOTES = (ROOT / "hardware_notes" / "README.md").read_text("utf-8")
BOX = json.loads((ROOT / "device" / "reference_box.json").read_text("utf-8"))


def row(name: str) -> str:
    """The value cell of a row of the table of numbers."""
    match = re.search(rf"^\| {re.escape(name)} \| (.*) \|$", NOTES, re.MULTILINE)
    assert match, name
    return match[1]


def test_the_numbers_are_those_of_the_reference_box() -> None:
    supply, paths, converter = BOX["supply"], BOX["paths"], BOX["converter"]
    safe, times, ratings = BOX["safe"], BOX["times"], BOX["ratings"]
    wanted = {
        "supply": [
            f"0 to {ratings['volts_mv'] // 1000} V",
            f"{supply['slew_mv_per_ms'] // 1000} V/ms",
            f"{supply['drift_uv_per_s']} uV/s",
            f"{supply['ripple_mv']} mV",
        ],
        "supply enable": [f"{supply['pump_hold_ms']} ms"],
        "charge path": [
            f"{paths['charge_ohm'] // 1000} kohm",
            f"{paths['charge_parts_ohm'][0] // 1000} kohm",
        ],
        "bleeds": [f"{paths['bleed_ohm'][0] // 1000} kohm"],
        "dividers, on the part and on the supply": [
            f"{paths['divider_top_ohm'] // 10**6} Mohm over {paths['divider_bottom_ohm'] // 1000} kohm"
        ],
        "shunts": ["560 ohm, 100 kohm, 1 Mohm"],
        "low node": [f"{paths['clamp_mv'] // 1000} V"],
        "converters": [f"{mv} mV" for mv in converter["ranges_mv"]]
        + [f"{converter['samples_per_s']} samples/s"],
        "safe": [f"{safe['safe_mv'] // 1000} V", f"{safe['still_ms']} ms", f"{safe['rebound_ms']} ms"],
        "proof by bleed time alone": [f"{safe['proof_bleed_ms'] // 1000} s"],
        "stored energy": [f"{ratings['energy_mj'] // 1000} J", f"{ratings['capacitance_nf'] // 1000} uF"],
        "control period": [f"{times['period_ms']} ms", f"{times['window_ms']} ms"],
        "watchdog": [f"{times['watchdog_ms']} ms"],
    }
    assert paths["shunts_ohm"] == [560, 100_000, 1_000_000]
    for name, pieces in wanted.items():
        for piece in pieces:
            assert piece in row(name), (name, piece)


def test_the_pins_are_those_of_the_board_file() -> None:
    board = (ROOT / "device" / "dwellbox" / "board_rp2.py").read_text("utf-8")
    docstring = board.split('"""')[1]
    for pin in sorted(set(re.findall(r"\bGP\d+\b", NOTES))):
        assert pin in docstring, pin
    assert set(re.findall(r"\bGP\d+\b", NOTES)) == set(re.findall(r"\bGP\d+\b", docstring))


def test_the_states_are_drawn_from_the_firmwares_table() -> None:
    done = subprocess.run(
        [sys.executable, str(ROOT / "hardware_notes" / "make_states.py"), "--check"], check=False
    )
    assert done.returncode == 0, "run python hardware_notes/make_states.py"
