"""Wear: what use does to each part, that it can be undone, and that a trend test finds it.

The fleets' trial, its statistic and how it was come to stand in tests/support/wear_trial.py.
"""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import kendalltau

from sim_link import mechanics
from sim_link.drive import Drive
from sim_link.fault_kinds import FaultKind
from sim_link.randomness import Draws
from sim_link.wear import MOST_DRAG, SHIPPED_RATES, WEARING, Wear, Wearing
from sim_link.wheel import RPM_A_RAD_S
from tests.support.virtual_console import PAVER, S, spec_of
from tests.support.wear_trial import (
    LEVEL,
    SHOWN_BY,
    SPEED_RPM,
    Sketch,
    alarmed,
    corrected,
    fleet_trial,
    kendall,
    normal_score,
    p_of,
    rising_p,
)

COUNTS = st.integers(0, 100_000)
PARTS = st.sampled_from(Wearing)
KINDS = st.sampled_from(list(WEARING))
COOL_C, HOT_C = 25.0, 70.0


def worn(part: Wearing) -> Wear:
    return Wear().begin(part, 0)


# --- the functions -------------------------------------------------------------------------


@given(COUNTS, st.floats(-20.0, 150.0))
def test_without_a_fault_nothing_changes_with_use_or_heat(count: int, brake_C: float) -> None:
    sound = Wear.of([FaultKind.WEAK_BRAKE, FaultKind.LOW_BATTERY])
    assert sound.worn_kind(PAVER, count, brake_C) is PAVER
    assert (sound.drag_part(count), sound.cell_ohm(count), sound.cell_capacity(count)) == (0, 1, 1)


def test_by_hand_after_three_hundred_motions() -> None:
    """A part of 1e-4 a motion: 1 / 1.03 of the brake is left, and 1 / 1.12 of magnets at 4e-4."""
    brake = worn(Wearing.BRAKE).worn_kind(PAVER, 300, COOL_C)
    assert brake == replace(PAVER, brake_torque_N_m=pytest.approx(2.9 / 1.03))
    magnets = worn(Wearing.MAGNETS).worn_kind(PAVER, 300, HOT_C)
    assert magnets == replace(PAVER, magnet_torque_N_m=pytest.approx(0.35 / 1.12))
    assert worn(Wearing.BEARING).drag_part(300) == pytest.approx(0.015)
    assert worn(Wearing.CELL).cell_ohm(300) == pytest.approx(1.045)
    assert worn(Wearing.CELL).cell_capacity(300) == pytest.approx(1 / 1.0225)


def test_a_fading_brake_is_weaker_while_hot_and_a_sound_one_is_not() -> None:
    """A thousandth with each kelvin above 40 degrees: 3 % at 70, beside what use has taken."""
    fading = worn(Wearing.BRAKE)
    cool, hot = (fading.worn_kind(PAVER, 100, each).brake_torque_N_m for each in (COOL_C, HOT_C))
    assert hot / cool == pytest.approx(0.97)
    assert worn(Wearing.MAGNETS).worn_kind(PAVER, 100, HOT_C).brake_torque_N_m == 2.9


@given(PARTS, COUNTS, COUNTS, st.floats(0.0, 150.0))
def test_more_use_never_makes_better(part: Wearing, one: int, other: int, brake_C: float) -> None:
    wear, (early, late) = worn(part), sorted((one, other))
    sooner, later = (wear.worn_kind(PAVER, count, brake_C) for count in (early, late))
    assert 0.0 < later.brake_torque_N_m <= sooner.brake_torque_N_m <= PAVER.brake_torque_N_m
    assert 0.0 < later.magnet_torque_N_m <= sooner.magnet_torque_N_m <= PAVER.magnet_torque_N_m
    assert 0.0 <= wear.drag_part(early) <= wear.drag_part(late) <= MOST_DRAG
    assert 1.0 <= wear.cell_ohm(early) <= wear.cell_ohm(late)
    assert 1.0 >= wear.cell_capacity(early) >= wear.cell_capacity(late) > 0.0


@given(PARTS, st.integers(1, 10_000), st.integers(0, 10_000))
def test_a_new_part_wears_as_the_old_one_did_from_its_own_first_motion(
    part: Wearing, changed: int, more: int
) -> None:
    old, new = worn(part), worn(part).renew(part, changed)
    for figure in (Wear.drag_part, Wear.cell_ohm, Wear.cell_capacity):
        assert figure(new, changed + more) == figure(old, more)
    assert new.worn_kind(PAVER, changed + more, COOL_C) == old.worn_kind(PAVER, more, COOL_C)
    others = [each for each in Wearing if each is not part]
    assert all(new.since[each] == 0 for each in others)


@given(KINDS, COUNTS)
def test_each_fault_is_one_wear_and_can_end(kind: FaultKind, count: int) -> None:
    wear, part = Wear.of([kind]), WEARING[kind]
    assert wear.rates == tuple(SHIPPED_RATES[each] if each is part else 0.0 for each in Wearing)
    assert wear.end(part).worn_kind(PAVER, count, HOT_C) is PAVER


# --- in a drive ----------------------------------------------------------------------------


def after(drive: Drive, motions: int, t_ns: int) -> int:
    """Let it move so often; return the time."""
    for _ in range(motions):
        drive.start_motion(1, SPEED_RPM, t_ns)
        while drive.due_ns is not None:
            t_ns = drive.due_ns
            drive.step()
        t_ns += 8 * S
    return t_ns


def test_the_body_is_braked_as_worn_and_keeps_its_own_kind() -> None:
    drive = Drive(spec_of(faults=frozenset({FaultKind.FADING_BRAKE})), Draws(3, 1))
    own = drive.body.kind
    after(drive, 20, 0)
    assert drive.body.kind == own
    braking, luck = drive.body.braking, 1.0 + 0.015 * Draws(3, 1).normal(20, "brake")
    assert braking is not None
    expected = own.brake_torque_N_m * luck / (1.0 + 20e-4)
    assert braking.kind.brake_torque_N_m < own.brake_torque_N_m * luck
    # 10 J a motion warm this brake to below the 40 degrees from which heat counts.
    assert braking.kind.brake_torque_N_m == pytest.approx(expected, rel=0.02)


def test_a_changed_cell_has_not_aged() -> None:
    drive = Drive(spec_of(faults=frozenset({FaultKind.AGEING_CELL})), Draws(3, 1))
    t_ns, cell = after(drive, 10, 0), drive.supply.battery
    assert (cell.aged_ohm, cell.aged_capacity) == (
        pytest.approx(1.0015), pytest.approx(1 / 1.00075)
    )  # fmt: skip
    drive.renew(Wearing.CELL, t_ns)
    assert (cell.aged_ohm, cell.aged_capacity, cell.charge) == (1.0, 1.0, 1.0)
    after(drive, 4, t_ns)
    assert cell.aged_ohm == pytest.approx(1.0006)


def test_a_wear_that_begins_and_ends_while_it_runs() -> None:
    drive = Drive(spec_of(), Draws(3, 1))
    t_ns = after(drive, 5, 0)
    drive.wear_out(Wearing.BEARING, True, t_ns)
    assert drive.wear.drag_part(5) == 0.0
    t_ns = after(drive, 5, t_ns)
    assert drive.wear.drag_part(10) == pytest.approx(5 * SHIPPED_RATES[Wearing.BEARING])
    drive.wear_out(Wearing.BEARING, False, t_ns)
    assert drive.wear.drag_part(10) == 0.0


# --- the statistic -------------------------------------------------------------------------


def test_kendall_s_statistic_on_a_published_example() -> None:
    """US EPA (2009), Unified Guidance, EPA 530/R-09-007, Example 17-7 (sodium in a well): tau
    0.5556, Z 2.1466, two-sided p 0.0318."""
    sodium = [56, 53, 51, 55, 52, 60, 62, 59, 61, 63]
    s, variance = kendall(sodium)
    assert s / 45 == pytest.approx(0.5555556, abs=6e-7)
    assert normal_score(s, variance) == pytest.approx(2.146625, abs=6e-7)
    assert 2.0 * rising_p([sodium]) == pytest.approx(0.03182313, abs=6e-7)
    falling = [1.26, 1.27, 1.12, 1.16, 1.03]
    assert kendall(falling)[0] == -6  # Hollander, Wolfe and Chicken, Example 9.1 (cloud seeding)
    assert rising_p([falling]) > 0.5


@given(st.lists(st.integers(0, 5), min_size=3, max_size=25))
def test_s_with_ties_is_that_behind_scipys_tau(values: list[int]) -> None:
    s, variance = kendall(values)
    if len(set(values)) == 1:
        assert (s, variance, rising_p([values])) == (0, 0.0, 0.5)
        return
    n0 = len(values) * (len(values) - 1) / 2
    tied = sum(a == b for i, a in enumerate(values) for b in values[:i])
    tau = kendalltau(range(len(values)), values).statistic
    assert s == pytest.approx(tau * (n0 * (n0 - tied)) ** 0.5)


# --- fleets --------------------------------------------------------------------------------


def test_the_sketch_of_a_motion_is_that_of_the_mechanics() -> None:
    """Three hundred motions' wear, and three standard deviations of speed: brake time within 0.3 %,
    peak rate within 0.5 % (found: 0.39 %), where both scatter by 2 %."""
    speed_rad_s = SPEED_RPM / RPM_A_RAD_S
    sketch = Sketch(PAVER, speed_rad_s)
    for part in (Wearing.BRAKE, Wearing.MAGNETS):
        kind = worn(part).worn_kind(PAVER, 300, COOL_C)
        for factor in (0.955, 1.0, 1.045):
            whole = mechanics.pivot(kind, factor * speed_rad_s, 1, 1)
            short = sketch.motion(kind, factor * speed_rad_s)
            assert short.brake_s == pytest.approx(whole.brake_s, rel=0.003)
            assert short.peak_rate_rad_s == pytest.approx(whole.peak_rate_rad_s, rel=0.005)


@pytest.mark.parametrize("kind", list(SHOWN_BY))
def test_three_hundred_motions_show_each_wear_in_its_own_measure(kind: FaultKind) -> None:
    found = corrected(fleet_trial(4_001, [kind]))
    assert found.pop(SHOWN_BY[kind]) < LEVEL
    assert min(found.values()) >= LEVEL


@pytest.mark.parametrize("kind", list(SHOWN_BY))
def test_thirty_motions_of_one_module_do_not(kind: FaultKind) -> None:
    """So it takes a review to see it."""
    one = [each[:30] for each in fleet_trial(4_002, [kind], motions=30)[:1]]
    assert p_of(one, SHOWN_BY[kind]) > LEVEL


def test_healthy_fleets_raise_no_alarm() -> None:
    """Six here; a hundred in the long proofs, of which at most one may."""
    assert not any(alarmed(fleet_trial(seed)) for seed in range(4_010, 4_016))
