"""What was seen, each with its evidence. Findings do not decide by themselves; the verdict reads them.

Ids: short, open_lead, reversed, intermittent, burst, rising, superlinear, forming, charging, unsettled, clipped,
residual_charge, fixture, below_series, value_off, estimates_disagree, sag, negative_current, uncalibrated, calibration, stale_zero,
interrupted, fault.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from dwellbench.judging.case import Case
from dwellbench.judging.rows import Row, insulation_rows
from dwellbench.judging.say import si, volts
from dwellbench.limits.decide import UNFIT
from dwellbench.measure.leakage import dwell_begin_s
from dwellbench.outcome import Finding
from dwellbench.quantity import COVERAGE_95

OPEN_F = 20e-12  # above what an empty fixture has
_OPEN_SHARE = 0.02
_SHORT_V_SHARE = 0.05
_SHORT_A_SHARE = 0.8
_FORMING_PER_S = -0.1 / 60.0  # falls by more than a tenth a minute
_FORMING_OVER_PER_S = -0.03 / 60.0  # above its limit: what falls like this for an hour may come below it
_POLAR = ("electrolytic", "tantalum")
_SUPERLINEAR = 1.5
_CHARGING_SHARE = 0.1
_FIXTURE_SHARE = 0.3
_SAG = 0.97
_RESIDUAL_V = 10.0


def findings(case: Case, rows: list[Row], series: list[Row]) -> list[Finding]:
    """All findings of a run that was measured. `rows` are the limits that decide, `series` what a series asks
    besides.
    """
    found = [finding for look in _LOOKS if (finding := look(case)) is not None]
    found += [finding for look in _WEIGHED if (finding := look(case, rows)) is not None]
    below = _below_series(case, series)
    return [*found, *([below] if below else [])]


def _short(case: Case) -> Finding | None:
    """The node stays down while the whole current of the charge path flows."""
    trace = case.trace
    rows = trace.rows("dwell") & trace.readable
    if not rows.any():
        return None
    supply_V, across_V = float(np.median(trace.v_supply_V[rows])), float(np.median(trace.across_V[rows]))
    amps, most_A = float(np.median(trace.i_shunt_A[rows])), supply_V / case.estimates.circuit.charge_ohm
    if supply_V < 5.0 or across_V > _SHORT_V_SHARE * supply_V or amps < _SHORT_A_SHARE * most_A:
        return None
    ohm = max(across_V, 0.0) / amps
    evidence = f"{volts(across_V)} on the part with {volts(supply_V)} supplied, {si(amps, 'A')} flows: about {si(ohm, 'ohm')}."
    return Finding("reversed" if case.part.polar and across_V > 1.0 else "short", evidence)


def _open_lead(case: Case) -> Finding | None:
    """The voltage came, and no charge with it."""
    found, marked = case.estimates.balance, case.part.capacitance_F
    if found is None or case.estimates.stretch is None:
        return None
    most_F = found.value + COVERAGE_95 * found.u
    if most_F > max(OPEN_F, _OPEN_SHARE * (marked or 0.0)):
        return None
    shown = si(max(found.value, 0.0), "F")
    against = f", marked {si(marked, 'F')}" if marked else ""
    return Finding(
        "open_lead",
        f"The voltage rose with a charge of only {shown} behind it{against}: nothing is connected.",
    )


def _clipped(case: Case) -> Finding | None:
    trace = case.trace
    rows = trace.rows("charge", "dwell")
    clipped = rows & ~trace.readable
    late = trace.rows("dwell") & (trace.t_s > trace.t_s[rows][-1] - 5.0) & clipped if rows.any() else clipped
    if not clipped.any():
        return None
    share = 100.0 * float(clipped.sum()) / float(rows.sum())
    where = ", the end of the dwell among them" if late.any() else ""
    return Finding(
        "clipped", f"{share:.2g} % of the rows of charge and dwell clipped{where}; they are no readings."
    )


def _unsettled(case: Case) -> Finding | None:
    begin_s = dwell_begin_s(case.trace)
    if begin_s is None or case.leakage is not None:
        return None
    settles_s = case.estimates.settled.settles_s
    told = f"the shunt settles in {settles_s:.3g} s" if settles_s else "no settled rows stand at its end"
    return Finding(
        "unsettled", f"The dwell of {case.estimates.dwell_s or 0.0:.3g} s ended before a reading: {told}."
    )


def _events(case: Case) -> Finding | None:
    events = case.estimates.events
    if not events.count:
        return None
    largest = si(events.largest_A, "A")
    evidence = f"{events.count} burst(s) while the voltage stood, the first at {events.first_s:.1f} s, up to {largest}."
    return Finding("intermittent" if events.count > 1 else "burst", evidence)


def _forming(case: Case, rows: list[Row]) -> Finding | None:
    """An electrolytic whose current still falls: fast, or so high that it matters how it goes on."""
    leak = case.leakage
    if leak is None or case.part.dielectric not in _POLAR or leak.through_A < 5.0 * leak.u_through_A:
        return None
    bounds = [row.most_A for row in insulation_rows(rows) if row.most_A is not None]
    over = bool(bounds) and leak.through_A > min(bounds)
    if leak.slope_per_s > (_FORMING_OVER_PER_S if over else _FORMING_PER_S):
        return None
    falls = f"{-6000.0 * leak.slope_per_s:.2g} % a minute"
    return Finding("forming", f"The current still falls by {falls} at the end of the dwell.")


def _rising(case: Case) -> Finding | None:
    """Heating, ions, a breakdown on its way: a sound part's current only falls."""
    leak = case.leakage
    if leak is None or not leak.rises:
        return None
    return Finding(
        "rising", f"The current rises by {6000.0 * leak.slope_per_s:.2g} % a minute at the end of the dwell."
    )


def _superlinear(case: Case) -> Finding | None:
    """Conductance at the test's voltage against that at the 20 V look, where the trace has it."""
    leak, low = case.leakage, case.estimates.low_leak
    if leak is None or low is None or case.part.dielectric in _POLAR or leak.volts_V < 3.0 * low.volts_V:
        return None
    high_S, u_high_S = leak.through_A / leak.volts_V, leak.u_through_A / leak.volts_V
    least, most = high_S - COVERAGE_95 * u_high_S, low.siemens + COVERAGE_95 * low.u_S
    if least <= _SUPERLINEAR * max(most, 0.0) or least <= 0.0:
        return None
    shown_low = si(1.0 / max(most, 1e-15), "ohm")
    evidence = (
        f"At {volts(leak.volts_V)} it insulates {si(1.0 / high_S, 'ohm')}, at {volts(low.volts_V)} more than "
        f"{shown_low}: "
        "the leak rises faster than the voltage."
    )
    return Finding("superlinear", evidence)


def _disagree(case: Case) -> Finding | None:
    apart, balance, curve = case.estimates.apart, case.estimates.balance, case.estimates.curve
    if apart is None or balance is None or curve is None:
        return None
    told = f"charge balance {si(balance.value, 'F', 4)}, charging curve {si(curve.capacitance.value, 'F', 4)}"
    return Finding(
        "estimates_disagree", f"The two ways to the capacitance differ by {100.0 * apart:.2g} %: {told}."
    )


def _sag(case: Case) -> Finding | None:
    supplied_V = case.supplied_V
    if case.test_V is None or supplied_V is None or case.test_V >= _SAG * supplied_V:
        return None
    evidence = (
        f"Only {volts(case.test_V)} of {volts(supplied_V)} stood on the part: its leak loads the charge path."
    )
    return Finding("sag", evidence)


def _negative(case: Case) -> Finding | None:
    leak = case.leakage
    if leak is None or leak.through_A + 3.0 * leak.u_through_A >= 0.0:
        return None
    evidence = f"The current reads {si(leak.through_A, 'A')}: a part that cools or a zero that moved, not insulation."
    return Finding("negative_current", evidence)


def _residual(case: Case) -> Finding | None:
    """A part that brought a charge along: before the first step of the supply."""
    residual_mv = case.trace.number("residual_mv") or 0.0
    first = np.flatnonzero(case.trace.rows("zero", "prove", "charge"))
    start_V = (
        float(case.trace.v_part_V[first[0]]) if first.size and case.trace.stage[first[0]] == "zero" else 0.0
    )
    found_V = max(residual_mv / 1e3, start_V)
    if found_V <= _RESIDUAL_V:
        return None
    return Finding("residual_charge", f"The part came with {volts(found_V)} on it.")


def _uncalibrated(case: Case) -> Finding | None:
    if case.trace.text("calibration") != "nominal":
        return None
    return Finding(
        "uncalibrated",
        "The box has no calibration; the drawing's numbers and their worst tolerances stand in.",
    )


def _calibration(case: Case) -> Finding | None:
    """The calibration has expired, or is another box's."""
    told = case.trace.text("calibration_doubt")
    return None if told is None else Finding("calibration", told)


def _stale_zero(case: Case) -> Finding | None:
    """The empty fixture was measured too long ago."""
    told = case.trace.text("zero_doubt")
    return None if told is None else Finding("stale_zero", told)


def _charging(case: Case, rows: list[Row]) -> Finding | None:
    """C dV/dt that matters against the hardest limit."""
    leak = case.leakage
    bounds = [row.most_A for row in insulation_rows(rows) if row.most_A is not None]
    if leak is None or not bounds or abs(leak.charging_A) <= _CHARGING_SHARE * max(min(bounds), leak.total_A):
        return None
    share = 100.0 * abs(leak.charging_A) / min(bounds)
    return Finding(
        "charging",
        f"The voltage still moves: {si(leak.charging_A, 'A')} charges the part, {share:.2g} % of the limit.",
    )


def _fixture(case: Case, rows: list[Row]) -> Finding | None:
    """The empty clips' share is a large part of what is read, or of what is allowed."""
    leak = case.leakage
    if leak is None:
        return None
    bounds = [row.most_A for row in insulation_rows(rows) if row.most_A is not None]
    of_limit = bounds and leak.fixture_A > _FIXTURE_SHARE * min(bounds)
    if not of_limit and leak.fixture_A < _FIXTURE_SHARE * leak.total_A:
        return None
    return Finding(
        "fixture", f"The empty fixture's share is {si(leak.fixture_A, 'A')} of {si(leak.total_A, 'A')} read."
    )


def _value_off(case: Case, rows: list[Row]) -> Finding | None:
    row = next((row for row in rows if row.result.id == "capacitance"), None)
    found, marked = case.estimates.capacitance, case.part.capacitance_F
    if row is None or row.p is None or found is None or not marked or case.thresholds.verdict(row.p) != UNFIT:
        return None
    off = 100.0 * (found.value / marked - 1.0)
    return Finding(
        "value_off", f"Found {si(found.value, 'F')}, {off:+.3g} % from the marked {si(marked, 'F')}."
    )


def _below_series(case: Case, series: list[Row]) -> Finding | None:
    """With a place given, a missed series limit is a finding and not the verdict."""
    if case.place is None:
        return None
    for row in insulation_rows(series):
        if row.rules and row.p is not None and case.thresholds.verdict(row.p) == UNFIT:
            wanted = si(row.result.value, row.result.unit)
            return Finding("below_series", f"Misses what the series asks ({wanted}, {row.result.source}).")
    return None


_LOOKS: tuple[Callable[[Case], Finding | None], ...] = (
    _short,
    _open_lead,
    _clipped,
    _unsettled,
    _events,
    _rising,
    _superlinear,
    _disagree,
    _sag,
    _negative,
    _residual,
    _uncalibrated,
    _calibration,
    _stale_zero,
)
_WEIGHED: tuple[Callable[[Case, list[Row]], Finding | None], ...] = (
    _forming,
    _charging,
    _fixture,
    _value_off,
)
