"""Cell and warmth: Ohm's law by hand, charge and energy accounts, monotone curve."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.battery import (
    AMBIENT_C,
    DRIVE_V,
    IDLE_W,
    LOW_V,
    Battery,
    Supply,
    Warmth,
    open_circuit_V,
)

POWERS = st.floats(0.0, 25.0)
CHARGES = st.floats(0.0, 1.0)
S = 1_000_000_000


def cell(charge: float = 0.9, resistance_ohm: float = 0.12) -> Battery:
    return Battery(500.0, resistance_ohm, charge)


@given(CHARGES, CHARGES)
def test_voltage_rises_with_charge(one: float, other: float) -> None:
    low, high = sorted((one, other))
    assert open_circuit_V(low) <= open_circuit_V(high)


def test_voltage_is_that_of_one_lithium_cell() -> None:
    # Common practice of the trade: 4.20 V full, 3.6 to 3.9 V over most of the charge.
    assert open_circuit_V(1.0) == pytest.approx(4.20)
    assert 3.6 < open_circuit_V(0.1) < open_circuit_V(0.5) < 3.9
    assert open_circuit_V(-0.5) == open_circuit_V(0.0)
    assert open_circuit_V(1.5) == open_circuit_V(1.0)


@given(CHARGES, POWERS)
def test_power_at_the_terminals_is_voltage_times_current(charge: float, power_W: float) -> None:
    battery = cell(charge)
    peak_W = battery.open_circuit_V**2 / (4 * 0.12)
    delivered_W = battery.terminal_V(power_W) * battery.current_A(power_W)
    assert delivered_W == pytest.approx(min(power_W, peak_W), rel=1e-6, abs=1e-9)


def test_a_worked_example_by_ohms_law() -> None:
    # 3 A through 0.12 ohm: the terminals are 0.36 V below the source.
    battery = cell()
    power_W = 3.0 * (battery.open_circuit_V - 0.36)
    assert battery.current_A(power_W) == pytest.approx(3.0)
    assert battery.sag_V(power_W) == pytest.approx(0.36)


def test_beyond_the_peak_the_cell_gives_what_it_can() -> None:
    battery = cell()
    assert battery.terminal_V(1000.0) == pytest.approx(battery.open_circuit_V / 2)


def test_a_cell_without_resistance_does_not_sag() -> None:
    battery = cell(resistance_ohm=0.0)
    assert battery.sag_V(20.0) == 0.0
    assert battery.current_A(20.0) == pytest.approx(20.0 / battery.open_circuit_V)
    assert battery.drive_W == math.inf


def test_the_motor_may_pull_the_terminals_to_the_drive_voltage_and_no_further() -> None:
    battery = cell()
    assert battery.terminal_V(battery.drive_W) == pytest.approx(DRIVE_V)
    assert cell(0.0).drive_W == 0.0


@given(CHARGES, POWERS, st.floats(0.0, 100.0))
def test_charge_only_falls_and_never_below_nothing(charge: float, W: float, s: float) -> None:
    battery = cell(charge)
    assert battery.drain(W, W, s) >= 0.0
    assert 0.0 <= battery.charge <= charge


def test_drain_counts_ampere_seconds_and_heat() -> None:
    battery = cell(0.9, 0.12)
    power_W = 2.0 * (battery.open_circuit_V - 0.24)
    heat_J = battery.drain(power_W, power_W, 9.0)
    assert 0.9 - battery.charge == pytest.approx(2.0 * 9.0 / (0.5 * 3600))
    assert heat_J == pytest.approx(2.0**2 * 0.12 * 9.0)


def test_low_is_a_matter_of_the_open_voltage() -> None:
    assert cell(0.02).low
    assert cell(0.02).open_circuit_V < LOW_V
    assert not cell(0.5).low


def test_warmth_decays_by_one_over_e_in_its_time_constant() -> None:
    warmth = Warmth(10.0, 0)
    assert warmth.temperature_C(0) == pytest.approx(AMBIENT_C + 10.0)
    assert warmth.temperature_C(900 * S) == pytest.approx(AMBIENT_C + 10.0 / math.e)


def test_heat_adds_to_what_has_cooled_meanwhile() -> None:
    warmth = Warmth(10.0, 0)
    warmth.heat(4200.0, 900 * S)
    assert warmth.temperature_C(900 * S) == pytest.approx(AMBIENT_C + 10.0 / math.e + 10.0)


def supply() -> Supply:
    return Supply(cell(), Warmth(0.0, 0))


def test_load_is_a_ramp_and_then_constant() -> None:
    source = supply()
    source.draw(1.0, 5.0, 0, 4 * S)
    assert source.load_W(0) == pytest.approx(IDLE_W + 1.0)
    assert source.load_W(S) == pytest.approx(IDLE_W + 2.0)
    assert source.load_W(4 * S) == source.load_W(9 * S) == pytest.approx(IDLE_W + 5.0)


@given(st.lists(st.integers(0, 20 * S), max_size=12))
def test_looking_more_often_changes_the_account_little(looks: list[int]) -> None:
    # The mean power stands for a ramp, so the account is not exactly the same: within 1 %.
    once, often = supply(), supply()
    for source in (once, often):
        source.draw(0.5, 8.0, 0, 10 * S)
    for look_ns in sorted(looks):
        often.account(look_ns)
    for source in (once, often):
        source.account(20 * S)
    used_once, used_often = 0.9 - once.battery.charge, 0.9 - often.battery.charge
    assert used_often == pytest.approx(used_once, rel=0.01)


def test_a_new_load_accounts_for_the_old_one() -> None:
    source = supply()
    source.draw(10.0, 10.0, 0, 0)
    source.draw(0.0, 0.0, 2 * S, 2 * S)
    used = 0.9 - source.battery.charge
    current_A = cell().current_A(10.0 + IDLE_W)
    assert used == pytest.approx(current_A * 2.0 / 1800.0, rel=1e-3)
    assert source.terminal_V(3 * S) == pytest.approx(
        source.battery.open_circuit_V, abs=0.12 * IDLE_W / 3.0
    )
    assert source.warmth.temperature_C(2 * S) > AMBIENT_C


def test_a_charger_gives_back_what_it_says_until_the_cell_is_full() -> None:
    source = supply()
    source.charge(2.0, 0)
    # Into the cell go 2 W less the idle load, at its voltage and what the resistance adds:
    # P = I (E + R I) in the other direction.
    current_A = -source.battery.current_A(IDLE_W - 2.0)
    assert current_A * (source.battery.open_circuit_V + 0.12 * current_A) == pytest.approx(1.82)
    assert source.terminal_V(0) > source.battery.open_circuit_V
    source.account(60 * S)
    assert source.battery.charge == pytest.approx(0.9 + current_A * 60.0 / 1800.0, rel=1e-3)
    source.account(10_000 * S)
    assert source.battery.charge == 1.0
    source.charge(0.0, 10_000 * S)
    source.account(10_600 * S)
    assert source.battery.charge == pytest.approx(1.0 - IDLE_W / 4.2 * 600.0 / 1800.0, abs=0.001)
