"""The supply: loads, accounts, charging, and how many motions a cell has in it."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.battery import IDLE_W, MARGIN, Supply, motions_left, spin_up_J
from sim_link.cell import LOW_V, Cell, charge_at
from sim_link.heat import AMBIENT_C, Warmth
from sim_link.kinds import Kind
from sim_link.mechanics import rest_torque_N_m
from tests.support.kinds import PLAIN

S = 1_000_000_000


def cell(charge: float = 0.9, resistance_ohm: float = 0.12) -> Cell:
    return Cell(500.0, resistance_ohm, charge)


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
    current_A = supply().battery.current_A(10.0 + IDLE_W)
    assert used == pytest.approx(current_A * 2.0 / 1800.0, rel=1e-3)
    rested_V = source.battery.open_circuit_V - source.battery.rc_V
    assert source.terminal_V(3 * S) == pytest.approx(rested_V, abs=0.12 * IDLE_W / 3.0)
    assert 0.0 < source.battery.rc_V < 0.03
    assert source.warmth.temperature_C(2 * S) > AMBIENT_C


def test_a_charger_gives_back_what_it_says_until_the_cell_is_full() -> None:
    source = supply()
    source.charge(2.0, 0)
    # Into the cell go 2 W less the idle load, at its voltage and what the resistance adds:
    # P = I (E + R I) in the other direction.
    current_A = -source.battery.current_A(IDLE_W - 2.0)
    ohm = source.battery.resistance_ohm  # a little over 0.12, the hall being cooler than 25 degrees
    assert current_A * (source.battery.open_circuit_V + ohm * current_A) == pytest.approx(1.82)
    assert source.terminal_V(0) > source.battery.open_circuit_V
    source.account(60 * S)
    assert source.battery.charge == pytest.approx(0.9 + current_A * 60.0 / 1800.0, rel=1e-3)
    source.account(10_000 * S)
    assert source.battery.charge == 1.0
    source.charge(0.0, 10_000 * S)
    source.account(10_600 * S)
    assert source.battery.charge == pytest.approx(1.0 - IDLE_W / 4.2 * 600.0 / 1800.0, abs=0.001)


# --- motions left ------------------------------------------------------------------------


def test_motions_left_by_hand() -> None:
    """Iw = 1.5e-5, 400 rad/s: 1.2 J in the wheel, 2 J from the cell at 60 %; 0.4 s at 0.015 N m
    cost 0.12 J of copper and with three idle seconds 0.612 J more. Of 400 mAh at 3.85 V nine tenths
    of what lies above 3.55 V count."""
    energy_J = 1.2 / 0.6 + 0.3 * 0.4 + 0.18 * 3.4
    assert spin_up_J(PLAIN, 400.0, 0.015) == pytest.approx(energy_J)
    usable = 1.0 - (0.03 + 0.07 * (3.55 - 3.40) / (3.64 - 3.40))
    assert 1.0 - charge_at(LOW_V) == pytest.approx(usable)
    expected = int(usable * (1.0 - MARGIN) * 0.4 * 3600 * 3.85 / energy_J)
    assert rest_torque_N_m(PLAIN, 1, -1) == 0.015
    assert motions_left(PLAIN, 400.0) == expected


@given(st.floats(50.0, 900.0), st.floats(1.0, 3.0), st.floats(0.0, 1.0))
def test_faster_or_emptier_leaves_fewer(speed: float, more: float, charge: float) -> None:
    assert motions_left(PLAIN, more * speed) <= motions_left(PLAIN, speed)
    assert motions_left(PLAIN, speed, charge) <= motions_left(PLAIN, speed)
    assert motions_left(PLAIN, speed, charge_at(LOW_V)) == 0


def test_the_promise_is_kept_with_a_tenth_to_spare() -> None:
    """So many spin-ups are taken from a full cell in a simulated supply: it is not low yet, and a
    quarter more of them make it so."""
    kind: Kind = PLAIN
    promised = motions_left(kind, 400.0)
    source, t_ns = Supply(Cell(400.0, 0.15, 1.0), Warmth(0.0, 0)), 0
    peak_W = 0.3 + 0.015 * 400.0 / 0.6
    lows = []
    for _ in range(int(1.25 * promised)):
        source.draw(0.3, peak_W, t_ns, t_ns + 4 * S // 10)
        source.draw(0.0, 0.0, t_ns + 4 * S // 10, t_ns + 4 * S // 10)
        t_ns += 34 * S // 10
        source.account(t_ns)
        lows.append(source.battery.low)
    assert not any(lows[:promised])
    assert lows[-1]


def test_a_look_is_good_for_some_seconds_once_the_cell_has_settled() -> None:
    """And never while a load changes or the slow part moves."""
    source = supply()
    source.account(300 * S)
    seen = {source.look(t * S)[0] for t in range(301, 305)}
    assert len(seen) == 1
    source.draw(5.0, 5.0, 305 * S, 305 * S)
    loaded = [source.look(t * S)[0] for t in range(306, 310)]
    assert loaded == sorted(loaded, reverse=True)
    assert len(set(loaded)) == 4
    source.draw(0.0, 0.0, 311 * S, 311 * S)
    relaxing = [source.look(t * S)[0] for t in range(312, 316)]
    assert relaxing == sorted(relaxing)
    assert len(set(relaxing)) == 4


@given(st.lists(st.floats(0.2, 6.0), min_size=1, max_size=30))
def test_what_a_look_shows_is_within_a_millivolt(waits_s: list[float]) -> None:
    looked, exact, t_ns = supply(), supply(), 0
    for wait_s in waits_s:
        t_ns += int(wait_s * 1e9)
        exact.account(t_ns)
        voltage_V, temperature_C = looked.look(t_ns)
        assert voltage_V == pytest.approx(exact.terminal_V(t_ns), abs=1e-3)
        assert temperature_C == pytest.approx(exact.warmth.temperature_C(t_ns), abs=0.01)


# --- what a report looks at ----------------------------------------------------------------


def test_a_look_sees_at_once_what_was_done_to_the_cell() -> None:
    """Though of a cell that is left alone it keeps what it saw for some seconds."""
    source, t_ns = supply(), 600 * S
    source.account(t_ns)
    assert source.look(t_ns + S) is source.look(t_ns)
    source.set_charge(0.2, t_ns + S)
    assert source.look(t_ns + S)[0] < 3.75
    source.swap(1.0, t_ns + 2 * S)
    assert source.look(t_ns + 2 * S)[0] > 4.15
    source.set_charge(0.5, t_ns + 3 * S)
    before_V = source.look(t_ns + 3 * S)[0]
    source.charge(2.0, t_ns + 3 * S)
    assert source.look(t_ns + 3 * S)[0] > before_V + 0.05
    source.charge(0.0, t_ns + 63 * S)
    assert source.look(t_ns + 63 * S)[0] == source.terminal_V(t_ns + 63 * S)


loads = st.tuples(st.floats(0.0, 20.0), st.floats(0.0, 4.0), st.integers(1, 60))


@given(st.lists(loads, min_size=1, max_size=15), st.floats(1.0, 2.0))
def test_the_terminals_stay_between_bounds(
    given_: list[tuple[float, float, int]], aged: float
) -> None:
    """A cell that is drawn on keeps half of its lowest open voltage at least, and one that is
    charged besides takes what the charger's volts make it, below 5 V."""
    source, t_ns = supply(), 0
    source.age(aged, 1.0, 0)
    for power_W, charger_W, wait_s in given_:
        source.charge(charger_W, t_ns)
        source.draw(power_W, power_W, t_ns, t_ns)
        t_ns += wait_s * S
        volts, _ = source.look(t_ns)
        assert 1.2 < volts < 5.0
        assert 0.0 <= source.battery.charge <= 1.0
