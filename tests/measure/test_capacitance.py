"""Both ways to the capacitance against a general solver's rows, and how they are put together."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from tests.measure.circuit_by_scipy import Setup, trace_of

from dwellbench.measure.charge import Leaks, Stretch, charge_balance, low_volts, stretch_of
from dwellbench.measure.curve import Curve, fit_curve
from dwellbench.measure.estimate import Estimate
from dwellbench.measure.estimates import combine
from dwellbench.measure.trace import Trace, circuit_of

PARTS = st.builds(
    Setup,
    capacitance_F=st.floats(0.2e-6, 20e-6),
    leak_S=st.sampled_from([0.0, 1e-10, 1e-8, 2e-7]),
    supply_V=st.floats(60.0, 640.0),
    begin_s=st.floats(0.11, 0.39),
    end_s=st.just(12.0),
)


def balance_of(trace: Trace, leak_S: float | None) -> Estimate:
    found = charge_balance(trace, circuit_of(trace), stretch_of(trace), Leaks(None, leak_S))
    assert found is not None
    return found


@settings(max_examples=25, deadline=None, derandomize=True)
@given(setup=PARTS)
def test_charge_balance_is_right_within_its_doubt(setup: Setup) -> None:
    found = balance_of(trace_of(setup), setup.leak_S)
    off = abs(found.value - setup.capacitance_F)
    assert off < 3.0 * found.u
    assert off < 4e-3 * setup.capacitance_F


@settings(max_examples=25, deadline=None, derandomize=True)
@given(setup=PARTS)
def test_the_curve_fits_within_its_doubt(setup: Setup) -> None:
    trace = trace_of(setup, box="0011223344556677")
    first = balance_of(trace, setup.leak_S)
    found = fit_curve(trace, circuit_of(trace), stretch_of(trace), first.value)
    assert found is not None
    off = abs(found.capacitance.value - setup.capacitance_F)
    assert off < max(2.0 * found.capacitance.u_own, 2e-4 * setup.capacitance_F)
    assert abs(found.leak_S - setup.leak_S) < max(2.0 * found.u_leak_S, 1e-10)
    assert found.scatter < 0.5


@pytest.mark.parametrize("microfarads", [0.3, 1.0, 2.0])
def test_a_whole_charging_fits_to_a_ten_thousandth(microfarads: float) -> None:
    """Window means of 0.1 s against a time constant down to 0.12 s: a model of instantaneous values would be off by per cent."""
    setup = Setup(microfarads * 1e-6, leak_S=1e-9, end_s=12.0)
    trace = trace_of(setup)
    found = fit_curve(trace, circuit_of(trace), stretch_of(trace), microfarads * 1.03e-6)
    assert found is not None
    assert found.capacitance.value == pytest.approx(setup.capacitance_F, rel=1e-4)


def test_the_curve_sees_when_the_supply_began() -> None:
    setup = Setup(1e-6, begin_s=0.314)
    found = fit_curve(trace_of(setup, box="0011"), circuit_of(trace_of(setup)), Stretch(0, 49), 1.02e-6)
    assert found is not None
    assert found.begin_s == pytest.approx(0.314, abs=1e-3)


def test_a_charge_resistor_that_is_off_does_not_spoil_either() -> None:
    """One per cent in Rc is 1 % in tau; only a fit that frees it keeps the capacitance."""
    setup = Setup(1e-6, charge_ohm=404e3)
    trace = trace_of(setup)
    found = fit_curve(trace, circuit_of(trace), stretch_of(trace), 1e-6)
    assert found is not None
    assert found.capacitance.value == pytest.approx(1e-6, rel=1e-3)
    assert balance_of(trace, 0.0).value == pytest.approx(1e-6, rel=1e-3)


def test_a_part_faster_than_the_rows_is_measured_by_its_charge() -> None:
    setup = Setup(0.05e-6, begin_s=0.25, end_s=2.0)
    assert balance_of(trace_of(setup), 0.0).value == pytest.approx(0.05e-6, rel=2e-3)


def test_a_leak_that_rises_with_the_voltage_is_not_taken_for_charge() -> None:
    """Where the leak is known only at the end, the sum that ends early and the trend between sums keep it right."""
    setup = Setup(4e-6, leak_S=0.0, end_s=12.0)
    trace = trace_of(setup)
    extra = 2e-7 * trace.v_part_V * (trace.v_part_V / 400.0) ** 4
    found = balance_of(replace(trace, i_shunt_A=trace.i_shunt_A + extra), 2e-7)
    assert abs(found.value - 4e-6) < 2.0 * found.u
    assert found.value == pytest.approx(4e-6, rel=0.02)


def test_clipped_and_unsettled_rows_are_no_charge() -> None:
    trace = trace_of(Setup(1e-6))
    clipped = trace.clipped.copy()
    clipped[4] = 0.05
    spoilt = replace(trace, clipped=clipped, i_shunt_A=np.where(np.arange(50) == 4, 1.0, trace.i_shunt_A))
    stretch = stretch_of(spoilt)
    assert stretch is not None
    assert stretch.first == 5
    high = replace(trace, shunt_ohm=np.full(50, 1e5), range_V=np.full(50, 200.0), unsettled=np.arange(50) < 8)
    after = stretch_of(high)
    assert after is not None
    assert after.first == 8


def test_a_gap_breaks_the_sum() -> None:
    trace = trace_of(Setup(1e-6))
    gap = np.zeros(50, dtype=bool)
    gap[6] = True
    stretch = stretch_of(replace(trace, gap=gap))
    assert stretch == Stretch(0, 5)


def test_nothing_charged_gives_nothing() -> None:
    trace = trace_of(Setup(1e-6, supply_V=1.0))
    assert stretch_of(trace) is None
    assert charge_balance(trace, circuit_of(trace), None) is None
    assert fit_curve(trace, circuit_of(trace), None, 1e-6) is None
    assert fit_curve(trace, circuit_of(trace), Stretch(0, 5), None) is None


def test_low_volts_are_cut_out_of_a_slow_charging_only() -> None:
    slow = trace_of(Setup(20e-6, end_s=12.0))
    found = low_volts(slow, stretch_of(slow))
    assert found is not None
    inside = slow.across_V[found.first : found.last + 1]
    assert inside.min() >= 15.0
    assert inside.max() <= 55.0
    fast = trace_of(Setup(0.2e-6))
    assert low_volts(fast, stretch_of(fast)) is None


def curve(value: float, u: float, scatter: float = 1.0) -> Curve:
    return Curve(Estimate(value, u), 0.0, 0.0, 0.0, 1.0, scatter)


def test_estimates_that_agree_are_weighed() -> None:
    both, apart = combine(Estimate(1.000e-6, 4e-9), curve(1.002e-6, 2e-9))
    assert both is not None
    assert apart is None
    assert both.value == pytest.approx(1.0016e-6)
    assert both.u_own == pytest.approx(2e-9 / 1.25**0.5)


def test_a_disagreement_is_a_finding_and_not_an_average() -> None:
    both, apart = combine(Estimate(1.00e-6, 1e-9), curve(1.05e-6, 1e-9))
    assert both is not None
    assert both.value == 1.00e-6
    assert both.u_own > 2e-8
    assert apart == pytest.approx(0.05)


def test_a_curve_that_does_not_fit_has_no_say() -> None:
    assert combine(Estimate(1e-6, 1e-8), curve(1.1e-6, 1e-9, scatter=9.0)) == (Estimate(1e-6, 1e-8), None)
    assert combine(None, curve(1e-6, 1e-9)) == (None, None)
