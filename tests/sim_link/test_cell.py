"""The cell's equivalent circuit: Ohm's law by hand, the RC pair, charge and energy accounts."""

import math
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.cell import (
    CHARGES,
    DRIVE_V,
    LOW_V,
    VOLTAGES,
    Cell,
    charge_at,
    cold_factor,
    open_circuit_V,
)

POWERS = st.floats(0.0, 25.0)
FRACTIONS = st.floats(0.0, 1.0)


def cell(charge: float = 0.9, resistance_ohm: float = 0.12, **more: float) -> Cell:
    return Cell(500.0, resistance_ohm, charge, **more)


@given(FRACTIONS, FRACTIONS)
def test_voltage_rises_with_charge(one: float, other: float) -> None:
    low, high = sorted((one, other))
    assert open_circuit_V(low) <= open_circuit_V(high)


def test_voltage_is_that_of_one_lithium_cell() -> None:
    # Common practice of the trade: 4.20 V full, 3.6 to 3.9 V over most of the charge.
    assert open_circuit_V(1.0) == pytest.approx(4.20)
    assert 3.6 < open_circuit_V(0.1) < open_circuit_V(0.5) < 3.9
    assert open_circuit_V(-0.5) == open_circuit_V(0.0)
    assert open_circuit_V(1.5) == open_circuit_V(1.0)


@given(FRACTIONS)
def test_the_curve_is_read_both_ways_and_the_kept_stretch_is_the_same(charge: float) -> None:
    assert charge_at(open_circuit_V(charge)) == pytest.approx(charge, abs=1e-12)
    used = cell(0.5)
    for visited in (0.95, charge, 0.01, charge):
        used.charge = visited
        assert used.open_circuit_V == pytest.approx(open_circuit_V(visited), abs=1e-12)


@pytest.mark.parametrize(("charge", "voltage_V"), list(zip(CHARGES, VOLTAGES, strict=True)))
def test_the_points_of_the_curve(charge: float, voltage_V: float) -> None:
    assert cell(charge).open_circuit_V == pytest.approx(voltage_V)
    assert charge_at(voltage_V) == pytest.approx(charge)


@given(FRACTIONS, POWERS)
def test_power_at_the_terminals_is_voltage_times_current(charge: float, power_W: float) -> None:
    one = cell(charge)
    peak_W = one.open_circuit_V**2 / (4 * 0.12)
    delivered_W = one.terminal_V(power_W) * one.current_A(power_W)
    assert delivered_W == pytest.approx(min(power_W, peak_W), rel=1e-6, abs=1e-9)


def test_a_worked_example_by_ohms_law() -> None:
    # 3 A through 0.12 ohm: the terminals are 0.36 V below the source.
    one = cell()
    power_W = 3.0 * (one.open_circuit_V - 0.36)
    assert one.current_A(power_W) == pytest.approx(3.0)
    assert one.sag_V(power_W) == pytest.approx(0.36)


def test_the_rc_pair_reaches_63_percent_after_its_time_constant() -> None:
    """1 - 1/e, as every textbook of circuits has it; here with 2 A through 0.07 ohm and 20 s."""
    one = cell(0.9, 0.12, rc_ohm=0.07, rc_s=20.0)
    power_W = 2.0 * (one.open_circuit_V - 0.24)
    one.drain(power_W, power_W, 20.0)
    assert one.rc_V == pytest.approx(0.14 * (1 - math.exp(-1)), rel=1e-9)
    one.drain(0.0, 0.0, 20.0)
    assert one.rc_V == pytest.approx(0.14 * (1 - math.exp(-1)) * math.exp(-1), rel=1e-9)


@given(st.floats(0.01, 60.0), st.floats(0.0, 10.0))
def test_at_rest_the_terminals_go_back_to_the_open_voltage(load_s: float, power_W: float) -> None:
    one = cell()
    one.drain(power_W, power_W, load_s)
    gaps = []
    for _ in range(6):
        gaps.append(one.open_circuit_V - one.terminal_V(0.0))
        one.drain(0.0, 0.0, 25.0)
    assert all(later <= sooner for sooner, later in pairwise(gaps))
    assert gaps[-1] == pytest.approx(gaps[0] * math.exp(-5), abs=1e-12)


def test_beyond_the_peak_the_cell_gives_what_it_can() -> None:
    one = cell()
    assert one.terminal_V(1000.0) == pytest.approx(one.open_circuit_V / 2)


def test_a_cell_without_resistance_does_not_sag() -> None:
    one = cell(resistance_ohm=0.0)
    assert one.sag_V(20.0) == 0.0
    assert one.current_A(20.0) == pytest.approx(20.0 / one.open_circuit_V)
    assert one.drive_W == math.inf
    one.drain(20.0, 20.0, 10.0)
    assert one.rc_V == 0.0


def test_the_motor_may_pull_the_terminals_to_the_drive_voltage_and_no_further() -> None:
    one = cell()
    assert one.terminal_V(one.drive_W) == pytest.approx(DRIVE_V)
    one.drain(8.0, 8.0, 30.0)
    assert one.terminal_V(one.drive_W) == pytest.approx(DRIVE_V)
    assert cell(0.0).drive_W == 0.0


@given(FRACTIONS, POWERS, st.floats(0.0, 100.0))
def test_charge_only_falls_and_never_below_nothing(charge: float, W: float, s: float) -> None:
    one = cell(charge)
    assert one.drain(W, W, s) >= 0.0
    assert 0.0 <= one.charge <= charge


@given(st.lists(st.tuples(POWERS, st.floats(0.01, 5.0)), max_size=20))
def test_charge_taken_is_the_sum_of_current_times_time(loads: list[tuple[float, float]]) -> None:
    one, taken_C = cell(1.0), 0.0
    for power_W, duration_s in loads:
        taken_C += one.current_A(power_W) * duration_s
        one.drain(power_W, power_W, duration_s)
    assert one.charge == pytest.approx(max(0.0, 1.0 - taken_C / 1800.0), abs=1e-9)


def test_heat_is_that_of_both_resistances() -> None:
    """2 A for 9 s: 4.32 J in 0.12 ohm; in the pair what its voltage's square over 0.07 ohm comes
    to, summed up here in small steps."""
    one = cell(0.9, 0.12, rc_ohm=0.07, rc_s=20.0)
    power_W = 2.0 * (one.open_circuit_V - 0.24)
    heat_J = one.drain(power_W, power_W, 9.0)
    steps = [0.14 * (1 - math.exp(-(i + 0.5) * 9e-4 / 20.0)) for i in range(10_000)]
    assert heat_J == pytest.approx(
        4 * 0.12 * 9.0 + sum(v * v / 0.07 * 9e-4 for v in steps), rel=1e-6
    )
    assert 0.9 - one.charge == pytest.approx(2.0 * 9.0 / (0.5 * 3600))


@given(POWERS, st.floats(1.0, 3.0))
def test_more_resistance_never_sags_less(power_W: float, factor: float) -> None:
    one, other = cell(), cell()
    other.aged_ohm = factor
    assert other.sag_V(power_W) >= one.sag_V(power_W)
    assert other.terminal_V(power_W) <= one.terminal_V(power_W) + 1e-12


def test_an_aged_cell_holds_less_and_a_fresh_one_all() -> None:
    aged = cell(1.0)
    aged.aged_capacity, aged.aged_ohm = 0.8, 1.5
    fresh = cell(1.0)
    for each in (aged, fresh):
        each.drain(1.0, 1.0, 60.0)
    # The current differs a little with the resistance, the charge by the capacity.
    assert (1.0 - aged.charge) / (1.0 - fresh.charge) == pytest.approx(1 / 0.8, rel=0.02)
    aged.replace(0.7)
    assert (aged.charge, aged.rc_V, aged.aged_ohm, aged.aged_capacity) == (0.7, 0.0, 1.0, 1.0)


def test_in_the_cold_resistance_rises() -> None:
    assert cold_factor(25.0) == 1.0
    assert cold_factor(0.0) == pytest.approx(1.74, abs=0.02)
    assert cold_factor(45.0) < 0.7
    one = cell()
    warm = one.sag_V(5.0)
    one.cold = cold_factor(0.0)
    assert one.sag_V(5.0) > 1.7 * warm


def test_low_is_a_matter_of_the_open_voltage() -> None:
    assert cell(0.02).low
    assert cell(0.02).open_circuit_V < LOW_V
    assert not cell(0.5).low
