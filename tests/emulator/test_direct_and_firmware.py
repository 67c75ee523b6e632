"""Direct traces say what the firmware's own run of the same part in the same box says."""

from __future__ import annotations

import json
import statistics
import zlib

import pytest

from dwellbench.emulator.direct import record
from dwellbench.emulator.in_process import InProcessBox
from dwellbench.emulator.reference import stages
from dwellbench.emulator.scenario import Scenario

SEED = 11
PARTS = {
    "film by ramp": ("leakage_ohm = 2e10\nabsorption = [[0.3, 1e-3], [3.0, 1e-3]]", 47e-9, 400.0),
    "paper by step": ("leakage_ohm = 5e8\nabsorption = [[0.3, 5e-3], [3.0, 5e-3]]", 0.47e-6, 250.0),
    "superlinear": ("superlinear = {at_V = 300.0, ohm_there = 2.7e8, exponent = 6.0}", 0.1e-6, 350.0),
}
STAGE, SHUNT, RANGE, NV, SV, NI, SI, FLAGS, VRANGE = 2, 3, 4, 5, 6, 9, 10, 16, 17


def line(message: dict) -> bytes:
    text = json.dumps(message, separators=(",", ":"))[:-1]
    return f'{text},"crc":"{zlib.crc32(text.encode()):08x}"}}\n'.encode()


def firmware_rows(scenario: Scenario, volts: float, dwell_s: float) -> tuple[list[list[int]], str]:
    """Rows and end of one run, driven over the wire like any host."""
    box = InProcessBox(scenario, SEED)
    box.link.attach(True)
    rows: list[list[int]] = []
    ends: list[str] = []
    rest = b""
    box.link.push(line({"jsonrpc": "2.0", "id": 1, "method": "hello", "params": {}}))
    for k in range(40_000):
        box.tick()
        rest += box.link.pull()
        *lines, rest = rest.split(b"\n")
        for message in map(json.loads, lines):
            if message.get("method") == "samples":
                rows += message["params"]["rows"]
            elif message.get("method") == "done":
                ends.append(message["params"]["end"])
        if k == 8_000:
            plan = {
                "run_key": "a",
                "volts_mv": round(volts * 1e3),
                "dwell_ms": round(dwell_s * 1e3),
                "expect_pf": 0,
            }
            box.link.push(line({"jsonrpc": "2.0", "id": 2, "method": "run", "params": plan}))
        elif k > 8_000 and k % 100 == 0:
            box.link.push(line({"jsonrpc": "2.0", "method": "keepalive", "params": {}}))
        if ends:
            return rows, ends[0]
    raise AssertionError("the run did not end")


def readings(rows: list[list[int]], calibration: dict) -> tuple[list[float], list[float]]:
    """Amperes and volts of every settled dwell row, in order."""
    zero = {(r[SHUNT], r[RANGE]): r[SI] / r[NI] for r in rows if r[STAGE] == stages()["zero"]}
    amps, volts = [], []
    for r in rows:
        if r[STAGE] == stages()["dwell"] and not r[FLAGS]:
            scale = calibration["amps"][r[SHUNT] * 2 + r[RANGE]]["per_code"]
            amps.append((r[SI] / r[NI] - zero[r[SHUNT], r[RANGE]]) * scale)
            row = calibration["volts"][r[VRANGE]]
            volts.append((r[SV] / r[NV] - row["offset_code"]) * row["per_code"])
    return amps, volts


def typical(amps: list[float]) -> float:
    """Of the last five windows: one with a slot lent to the reference has mains hum left in it."""
    return statistics.median(amps[-5:])


@pytest.mark.parametrize("name", PARTS)
def test_firmware_driven_runs_agree(name):
    text, farad, volts = PARTS[name]
    scenario = Scenario.parse(f"[[part]]\ncapacitance_F = {farad}\n{text}\n")
    rows, end = firmware_rows(scenario, volts, 12.0)
    assert end == "complete"
    direct = record(scenario.parts[0], volts, 1.0, SEED)
    theirs = readings(rows, direct.calibration)
    held = theirs[1][-1]
    assert held == pytest.approx(volts, rel=0.01)
    # the firmware's setting has its own rounding: hold the part at what it was held at
    direct = record(
        scenario.parts[0], volts * held / readings(direct.rows, direct.calibration)[1][-1], 12.0, SEED
    )
    ours = readings(direct.rows, direct.calibration)
    assert ours[1][-1] == pytest.approx(held, rel=5e-4)
    for end in (-30, -10, len(ours[0])):  # windows before the end of the dwell
        assert typical(ours[0][:end]) == pytest.approx(typical(theirs[0][:end]), rel=0.01, abs=3e-11)
    assert {tuple(r[SHUNT : RANGE + 1]) for r in direct.rows} == {tuple(r[SHUNT : RANGE + 1]) for r in rows}
