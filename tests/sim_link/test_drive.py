"""The drive: its table of activities, gentle torques, and that rests move nothing."""

import itertools
from dataclasses import replace
from pathlib import Path

import pytest

import protocol
from protocol.codes import Activity
from sim_link import mechanics
from sim_link.drive import NEXT_ACTIVITY, Cue, Drive
from sim_link.errors import SimStateError
from sim_link.kinds import Kind
from sim_link.randomness import Draws
from tests.support.virtual_console import MS, PAVER, S, spec_of

PEBBLE = replace(
    PAVER,
    name="pebble",
    side_m=0.06,
    mass_kg=0.28,
    wheel_inertia_kg_m2=1.68e-5,
    body_inertia_kg_m2=1.7e-4,
    brake_torque_N_m=0.40,
    spin_up_torque_N_m=0.012,
    magnet_torque_N_m=0.0,
    held=False,
    floor_friction=0.9,
)
STRONG_MOTOR = replace(PEBBLE, name="strong", spin_up_torque_N_m=5.0)
LOPSIDED = replace(STRONG_MOTOR, name="lopsided", com_offset_m=(0.012, -0.009))
KINDS = (PAVER, PEBBLE, STRONG_MOTOR, LOPSIDED)


def drive_of(kind: Kind = PAVER, face_up: int = 1, charge: float = 0.95) -> Drive:
    spec = spec_of(kind, face_up, charge)
    return Drive(spec, Draws(3, spec.identity))


def run_out(drive: Drive) -> tuple[list[Activity], int]:
    """Step until the drive is still; return the activities and the time."""
    seen, t_ns = [], 0
    while drive.due_ns is not None:
        t_ns = drive.due_ns
        seen.append(drive.step())
    return seen, t_ns


def test_brake_once_engaged_knows_no_rest() -> None:
    assert (Activity.BRAKING, Cue.REST) not in NEXT_ACTIVITY
    assert (Activity.SETTLING, Cue.REST) not in NEXT_ACTIVITY


def test_the_brake_is_reached_from_spinning_up_alone() -> None:
    ways = [before for (before, _), after in NEXT_ACTIVITY.items() if after is Activity.BRAKING]
    assert ways == [Activity.SPINNING_UP]


def test_every_activity_can_end_at_still() -> None:
    ahead = {before: set() for before in Activity}  # type: dict[Activity, set[Activity]]
    for (before, _), after in NEXT_ACTIVITY.items():
        ahead[before].add(after)
    for start in set(Activity) - {Activity.STAGED}:  # in which the drive itself is still
        reached, front = {start}, {start}
        while front:
            front = set().union(*(ahead[each] for each in front)) - reached
            reached |= front
        assert Activity.STILL in reached


def test_a_pivot_goes_through_its_activities() -> None:
    drive = drive_of()
    drive.start_motion(1, 6000, 0)
    assert drive.activity is Activity.SPINNING_UP
    assert run_out(drive)[0] == [Activity.BRAKING, Activity.SETTLING, Activity.STILL]


def test_spin_up_time_is_momentum_over_torque() -> None:
    # Iw w / tau at 0.02 N m, the motor's own limit for this kind; 1 % for the module's wheel.
    drive = drive_of()
    drive.start_motion(1, 4000, 0)
    assert drive.due_ns is not None
    expected_s = 6.0e-5 * 4000 / 9.5493 / 0.02
    assert (drive.due_ns - 60 * MS) / S == pytest.approx(expected_s, rel=0.04)


def test_a_weak_cell_spins_up_slower_and_is_not_pulled_down() -> None:
    full, weak = drive_of(charge=0.95), drive_of(charge=0.12)
    for drive in (full, weak):
        drive.start_motion(1, 8000, 0)
        assert drive.due_ns is not None
        assert drive.supply.terminal_V(drive.due_ns - 60 * MS) > 3.05
    assert weak.due_ns > 1.2 * full.due_ns  # type: ignore[operator]


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.name)
def test_the_motor_pulls_with_at_most_half_of_what_tips(kind: Kind) -> None:
    for face_up, sense in itertools.product((1, 2, 3, 4), (1, -1)):
        torque = drive_of(kind, face_up).gentle_torque_N_m(sense, 0)
        assert torque <= 0.5 * mechanics.tipping_torque_N_m(kind, face_up, sense) + 1e-12
        assert torque <= kind.spin_up_torque_N_m


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.name)
@pytest.mark.parametrize("face_up", [1, 2, 3, 4, 5, 6])
@pytest.mark.parametrize("sense", [1, -1])
def test_rest_never_moves_a_module(kind: Kind, face_up: int, sense: int) -> None:
    for speed_rpm, cut_ms in itertools.product((900, 4000, 9000), (1, 90, 700, 5000)):
        drive = drive_of(kind, face_up)
        drive.start_spin(sense * speed_rpm, 3 * S, 0)
        t_ns = 0
        while drive.due_ns is not None and drive.due_ns <= cut_ms * MS:
            t_ns = drive.due_ns
            drive.step()
        drive.rest(max(t_ns, cut_ms * MS))
        _, end_ns = run_out(drive)
        assert drive.activity is Activity.STILL
        assert drive.wheel.speed_rad_s(max(end_ns, cut_ms * MS)) == 0.0
        assert drive.body.posture(max(end_ns, cut_ms * MS)) == (face_up, 0.0, True)
        assert drive.body.turned_rad == 0.0


@pytest.mark.parametrize("sense", [1, -1])
def test_a_rest_that_pulls_too_hard_would_be_seen(
    monkeypatch: pytest.MonkeyPatch, sense: int
) -> None:
    drive = drive_of(STRONG_MOTOR)
    drive.start_spin(sense * 8000, 10 * S, 0)
    while drive.activity is not Activity.HOLDING:
        drive.step()
    t_ns = 5 * S
    tipping = mechanics.tipping_torque_N_m
    monkeypatch.setattr(
        mechanics, "rest_torque_N_m", lambda kind, face, way: 1.2 * tipping(kind, face, way)
    )
    drive.rest(t_ns)
    assert not drive.body.posture(t_ns + 10 * MS).settled
    _, end_ns = run_out(drive)
    after = drive.body.posture(end_ns + S)
    assert after == ({1: 2, -1: 4}[sense], 0.0, True)


def test_too_hard_a_spin_up_tips_the_other_way(monkeypatch: pytest.MonkeyPatch) -> None:
    # The reaction of spinning up pushes against the wheel's sense (mechanics, equation 9).
    tipping = mechanics.tipping_torque_N_m
    monkeypatch.setattr(
        mechanics, "rest_torque_N_m", lambda kind, face, way: 1.2 * tipping(kind, face, way)
    )
    drive = drive_of(STRONG_MOTOR)
    drive.supply.battery.series_ohm = 0.0  # so that the cell does not limit the motor
    drive.start_spin(8000, 0, 0)
    assert drive.body.posture(S).face_up == 4


def test_rest_of_a_still_drive_is_nothing() -> None:
    drive = drive_of()
    assert not drive.rest(0)
    assert drive.due_ns is None


def test_recover_ends_a_flash_and_rests_a_wheel_but_not_a_brake() -> None:
    flashing, spinning, braking = drive_of(), drive_of(), drive_of()
    flashing.start_flash(5 * S, 0)
    flashing.recover(S)
    assert flashing.activity is Activity.STILL
    spinning.start_spin(4000, 5 * S, 0)
    spinning.recover(S)
    assert spinning.activity is Activity.RESTING
    braking.start_motion(1, 6000, 0)
    braking.step()
    assert braking.due_ns is not None
    braking.recover(braking.due_ns - 1000)
    assert braking.activity is Activity.BRAKING


def test_energy_of_a_motion_is_a_little_more_than_the_wheels() -> None:
    drive = drive_of()
    drive.supply.account(0)
    before = drive.supply.battery.charge
    drive.start_motion(1, 6000, 0)
    _, end_ns = run_out(drive)
    drive.supply.account(end_ns)
    used_J = (before - drive.supply.battery.charge) * 0.5 * 3600 * 4.1
    wheel_J = 0.5 * 6.0e-5 * (6000 / 9.5493) ** 2
    assert wheel_J / 0.6 < used_J < 1.6 * wheel_J / 0.6


def test_time_left_covers_a_brake_under_way() -> None:
    drive = drive_of()
    drive.start_motion(1, 6000, 0)
    t_ns = drive.due_ns or 0
    drive.step()
    _, end_ns = run_out(drive)
    fresh = drive_of()
    fresh.start_motion(1, 6000, 0)
    fresh.step()
    assert t_ns + fresh.left_ns(t_ns) >= end_ns


def test_motions_count_on_and_luck_changes_with_them() -> None:
    drive, brakes = drive_of(), []
    t_ns = 0
    for _ in range(3):
        drive.start_motion(1, 3000, t_ns)
        t_ns = run_out(drive)[1]
        assert drive.motion is not None
        assert drive.motion.result is not None
        brakes.append(drive.motion.result.brake_s)
    assert len(set(brakes)) == 3


def test_a_step_with_nothing_due_is_our_mistake() -> None:
    drive = drive_of()
    with pytest.raises(SimStateError, match="nothing is due"):
        drive.step()
    with pytest.raises(SimStateError):
        drive._enter_braking(0)


def test_the_wire_document_s_table_of_activities_is_the_drive_s() -> None:
    """WIRE.md, "What a module does, and what changes it"; what is staged is works.py's."""
    text = Path(protocol.__file__).with_name("WIRE.md").read_text(encoding="utf-8")
    table = text.split("### What a module does, and what changes it")[1].split("### ")[0]
    rows = [
        [cell.strip() for cell in line[1:-1].split("|")]
        for line in table.splitlines()
        if line.startswith("| ") and not line.startswith("| from")
    ]
    told = {(before, after) for before, _, after in rows if "STAGED" not in (before, after)}
    done = {(before.name, after.name) for (before, _), after in NEXT_ACTIVITY.items()}
    assert told == done


def test_a_cell_can_be_emptied_swapped_and_charged() -> None:
    drive = Drive(spec_of(charge=0.5), Draws(1, 1))
    battery = drive.supply.battery
    drive.set_charge(None, S)
    assert battery.low
    drive.swap_cell(2 * S)
    assert battery.charge == 1.0
    drive.set_charge(0.5, 3 * S)
    drive.start_charging(3 * S)
    drive.supply.account(3 * S + 1800 * S)
    # Half of the capacity an hour, less what the idle module takes, for half an hour.
    assert battery.charge == pytest.approx(0.7, abs=0.04)
    drive.stop_charging(2000 * S)
    before = battery.charge
    drive.supply.account(2100 * S)
    assert battery.charge < before
