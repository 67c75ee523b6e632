"""The current at the end of the dwell: readings, absorption, drift, bursts; on rows made by hand."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from dwellbench.measure.events import events
from dwellbench.measure.leakage import Leakage, bursts, dwell_begin_s, read_leakage
from dwellbench.measure.ratios import recovery_percent, resistance_ratio
from dwellbench.measure.settled import settled
from dwellbench.measure.trace import Trace, circuit_of

CHANCE = np.random.default_rng(20260105)
HEADER = {"fixture_ohm": 1e15, "u_gain_v": 0.0, "u_gain_i": 0.0, "charge_ohm": 400e3, "divider_ohm": 100.1e6}


def dwell(
    amps: np.ndarray, volts: np.ndarray | float = 500.0, noise_A: float = 1e-12, shunt_ohm: float = 1e6
) -> Trace:
    """A dwell of 0.1 s rows with this current; the first row ends at 0.1 s."""
    size = amps.size
    nan, none = np.full(size, np.nan), np.zeros(size, dtype=bool)
    noisy = amps + CHANCE.normal(0.0, noise_A, size)
    return Trace(
        t_s=0.1 * np.arange(1, size + 1),
        interval_s=np.full(size, 0.1),
        stage=np.full(size, "dwell"),
        shunt_ohm=np.full(size, shunt_ohm),
        v_part_V=np.broadcast_to(np.asarray(volts, dtype=float), size) + noisy * shunt_ohm,
        i_shunt_A=noisy,
        v_supply_V=np.full(size, 502.0),
        clipped=np.zeros(size),
        unsettled=none,
        ramp=none,
        gap=none,
        v_clipped=none,
        range_V=np.full(size, 0.256),
        u_offset_A=np.full(size, 1e-13),
        v_min_V=nan,
        v_max_V=nan,
        i_min_A=noisy - 4e-12,
        i_max_A=noisy + 4e-12,
        header=HEADER,
    )


def middle(size: int) -> np.ndarray:
    return 0.1 * np.arange(1, size + 1) - 0.05


def read(trace: Trace, farads: float | None = 1e-7, at_s: float | None = None) -> Leakage | None:
    circuit = circuit_of(trace)
    return read_leakage(trace, circuit, settled(trace, circuit, farads), farads, at_s)


def test_a_plain_leak_is_read_as_it_is() -> None:
    leak = read(dwell(np.full(600, 2e-8)))
    assert leak is not None
    assert leak.time_s == pytest.approx(60.0)
    assert leak.volts_V == pytest.approx(500.0)
    assert leak.total_A == pytest.approx(2e-8, abs=4e-13)
    assert leak.absorbed_A < 3e-12
    assert leak.least_A <= leak.conduction_A <= leak.through_A


@pytest.mark.parametrize("exponent", [0.7, 1.0, 1.15])
def test_absorption_is_bounded_by_its_slope(exponent: float) -> None:
    """On a decay t^-n, n at least 0.6, conduction lies in the stated interval."""
    at = middle(600)
    leak = read(dwell(5e-9 + 6e-8 * at**-exponent))
    assert leak is not None
    true_absorbed = 6e-8 * 60.0**-exponent
    assert leak.absorbed_A == pytest.approx(exponent * true_absorbed, rel=0.15)
    assert leak.least_A - 1e-12 < 5e-9 < leak.through_A
    assert abs(leak.conduction_A - 5e-9) < 2.0 * leak.u_conduction_A


def test_the_reading_is_that_of_the_stated_time() -> None:
    at = middle(1200)
    trace = dwell(1e-9 + 1e-7 / at)
    for time_s in (30.0, 60.0, 120.0):
        leak = read(trace, at_s=time_s)
        assert leak is not None
        assert leak.total_A == pytest.approx(1e-9 + 1e-7 / time_s, rel=0.02)


def test_a_drifting_voltage_is_taken_off_or_doubted() -> None:
    at = middle(600)
    moving = read(dwell(np.full(600, 5e-9) + 1e-6 * 2e-3, 500.0 + 2e-3 * at), farads=1e-6)
    assert moving is not None
    assert moving.charging_A == pytest.approx(2e-9, rel=0.02)
    assert moving.through_A == pytest.approx(5e-9, rel=0.02)
    still = read(dwell(np.full(600, 5e-9)), farads=1e-6)
    assert still is not None
    assert still.u_charging_A >= 0.0


def test_no_reading_without_settled_rows_at_the_end() -> None:
    trace = dwell(np.full(200, 5e-9))
    assert read(replace(trace, unsettled=np.ones(200, dtype=bool))) is None
    late = np.where(np.arange(200) > 150, 0.2, 0.0)
    assert read(replace(trace, clipped=late)) is None
    assert read(replace(trace, stage=np.full(200, "charge"))) is None
    assert dwell_begin_s(replace(trace, stage=np.full(200, "charge"))) is None


def test_a_new_shunt_blanks_seven_time_constants() -> None:
    trace = dwell(np.full(200, 5e-9))
    stepped = replace(trace, shunt_ohm=np.where(np.arange(200) < 50, 1e5, 1e6))
    circuit = circuit_of(stepped)
    mask = settled(stepped, circuit, 1e-6)
    assert mask.settles_s == pytest.approx(7 * (1e6 + circuit.thevenin_ohm) * 1e-6)
    first = int(np.flatnonzero(mask.readings & (np.arange(200) >= 50))[0])
    assert 0.1 * first == pytest.approx(5.0 + mask.settles_s, abs=0.25)


def test_near_full_scale_is_clipped_even_if_nobody_says_so() -> None:
    trace = dwell(np.full(100, 0.2559e-6))
    assert not trace.readable.any()


def test_bursts_are_told_from_noise_and_from_a_slope() -> None:
    rows = np.ones(100, dtype=bool)
    sloping = 1e-9 * np.arange(100) + CHANCE.normal(0.0, 1e-11, 100)
    assert not bursts(sloping, rows).any()
    sloping[[20, 70]] += 5e-9
    assert np.flatnonzero(bursts(sloping, rows)).tolist() == [20, 70]


def test_events_count_separate_bursts() -> None:
    at = middle(600)
    amps = 1e-9 + 3e-8 / at
    quiet = dwell(amps)
    none = events(quiet, settled(quiet, circuit_of(quiet), 1e-8))
    assert none.count == 0
    short = replace(quiet, i_max_A=np.where(np.isin(np.arange(600), (200, 333)), 5e-8, quiet.i_max_A))
    found = events(short, settled(short, circuit_of(short), 1e-8))
    assert found.count == 2
    assert found.first_s == pytest.approx(20.1)
    assert found.largest_A > 4e-8
    jump = dwell(np.where((at > 30) & (at < 30.6), 2e-8, amps))
    assert events(jump, settled(jump, circuit_of(jump), 1e-8)).count >= 1


def test_ripple_that_beats_with_the_sampling_is_no_event() -> None:
    trace = dwell(np.full(600, 5e-9))
    beat = 4e-9 * np.abs(np.sin(np.arange(600) / 20.0))
    rippled = replace(trace, i_min_A=trace.i_shunt_A - beat, i_max_A=trace.i_shunt_A + beat)
    assert events(rippled, settled(rippled, circuit_of(rippled), 1e-8)).count == 0


@pytest.mark.parametrize("exponent", [0.5, 1.0])
def test_ratios_of_a_pure_power_law(exponent: float) -> None:
    """With I = a t^-n the absorption ratio is 2^n and the polarisation index 10^n: an identity."""
    at = middle(6000)
    trace = dwell(1e-6 * at**-exponent, noise_A=1e-13)
    circuit = circuit_of(trace)
    mask = settled(trace, circuit, 1e-9)
    for times, ratio in (((30.0, 60.0), 2.0**exponent), ((60.0, 600.0), 10.0**exponent)):
        found = resistance_ratio(trace, circuit, mask, 1e-9, times, 600.0)
        assert found is not None
        assert found.value == pytest.approx(ratio, rel=0.02)
    assert resistance_ratio(trace, circuit, mask, 1e-9, (60.0, 600.0), 300.0) is None


def test_recovery_puts_back_what_the_divider_drained() -> None:
    """A steady 0.5 V recovered on 1 uF while the divider drains: the loaded voltage alone would read low."""
    farads, ohm = 1e-6, 100.1e6
    at = middle(200)
    loaded = 0.5 * np.exp(-at / (farads * ohm))
    trace = replace(dwell(np.zeros(200), volts=loaded, noise_A=0.0), stage=np.full(200, "recovery"))
    found = recovery_percent(trace, circuit_of(trace), farads, 500.0)
    assert found is not None
    assert found.value == pytest.approx(0.1, rel=0.01)
    assert loaded.min() < 0.42
    assert recovery_percent(trace, circuit_of(trace), None, 500.0) is None
    nothing = replace(trace, v_part_V=np.zeros(200))
    below = recovery_percent(nothing, circuit_of(trace), farads, 500.0)
    assert below is not None
    assert below.value is None
