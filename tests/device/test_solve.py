"""What the look makes of charge and voltage: parts worked out by hand, currents through 400 kohm at 20 V."""

import pytest

from dwellbox.stages.solve import capacitance_pf, standing


def looked(
    pf: float, ohm: float, ramp_s: float = 0.7, hold_s: float = 0.5
) -> tuple[tuple[int, int, int], tuple[int, int, int]]:
    """Charge, rise and area of an ideal ramp from 5 V to 19 V and a hold there, computed in volts and seconds."""
    slope = 14.0 / ramp_s
    area_ramp = 5.0 * ramp_s + slope * ramp_s**2 / 2
    charge_ramp = pf * 1e-12 * 14.0 + area_ramp / ohm
    area = area_ramp + 19.0 * hold_s
    charge = charge_ramp + 19.0 * hold_s / ohm
    return (
        (round(charge_ramp * 1e15), 14000, round(area_ramp * 1e6)),
        (round(charge * 1e15), 14000, round(area * 1e6)),
    )


@pytest.mark.parametrize(
    ("pf", "ohm"), [(47_000, 1e12), (47_000, 1e6), (1_000_000, 1e7), (100, 1e12), (4_700, 3e6)]
)
def test_leakage_is_not_taken_for_capacitance(pf: float, ohm: float) -> None:
    ramp, whole = looked(pf, ohm)
    found, _ = capacitance_pf(ramp, whole, True)
    assert found == pytest.approx(pf, rel=0.01)


def test_a_capacitance_that_leakage_hides_is_said_to_be_blurred() -> None:
    assert capacitance_pf(*looked(100, 1e6), True)[1]
    assert not capacitance_pf(*looked(47_000, 1e9), True)[1]


def test_while_the_voltage_rises_the_plain_quotient_answers() -> None:
    assert capacitance_pf((0, 0, 0), (100_000_000_000, 2000, 10_000), False) == (50_000_000, False)


@pytest.mark.parametrize(
    ("change_mv", "current_pa", "stands"),
    [
        (0, 0, True),
        (10, 50_000_000, True),
        (100, 50_000_000, False),
        (100, 5_000_000_000, True),
        (-50, 1, False),
    ],
)
def test_the_voltage_stands_when_little_of_the_current_charges(
    change_mv: int, current_pa: int, stands: bool
) -> None:
    """A 100 uF part (2 V, 200 uC): 100 mV in 300 ms would take 10 uC, 33 uA of the 50 uA that flow."""
    assert standing(200_000_000_000, 2000, change_mv, current_pa, 300) is stands
