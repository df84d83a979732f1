"""A module's own interlocks: each by itself, their order, and that rest is in none."""

from dataclasses import replace

import pytest

from protocol.codes import Fault, Reason, Setting, SettingId
from protocol.message import (
    Command,
    Flash,
    Hop,
    LockOut,
    Pivot,
    Probe,
    Rest,
    SettingWrite,
    Spin,
    Twist,
    Unlock,
)
from sim_link.box import Boot, Box
from sim_link.deed import Deed
from sim_link.faults import Faults
from sim_link.mechanics import MotionResult
from sim_link.module_time import ModuleTime
from sim_link.refusals import Look, refusal
from tests.support.boxes import boxed
from tests.support.virtual_console import CONSOLE, EPOCH, PAVER, S, permit, spec_of

LATEST_MS = 2_000_000_000
PIVOT = Pivot(1, 1, 1, 1, LATEST_MS, 0, 1, 1, 4000)
SPIN = Spin(1, 1, 1, 1, LATEST_MS, -4000, 100)
REST = Rest(1, 1, 1, 1)
FLASH = Flash(1, 1, 1, 1, 100)
HOP = Hop(1, 1, 1, 1, LATEST_MS, 0, 1, 4000)
TWIST = Twist(1, 1, 1, 1, LATEST_MS, 0, 1, 4000)
LOCK, UNLOCK = LockOut(1, 1, 1, 1, b"Ada"), Unlock(1, 1, 1, 1, b"Ada")
GROUPS = SettingWrite(1, 1, 1, 1, SettingId.GROUPS, 5)
ALL = (PIVOT, SPIN, FLASH, REST, LOCK, UNLOCK, GROUPS)


def box_of(face_up: int = 1, charge: float = 0.95) -> Box:
    return boxed(spec_of(PAVER, face_up, charge))


def why(command: Command, box: Box, t_ns: int = 0, engaged: bool = False) -> Reason:
    return refusal(Look(command, box, engaged, t_ns))


def reasons_of(box: Box, t_ns: int = 0, engaged: bool = False) -> dict[str, Reason]:
    """Which of ALL are refused, and why."""
    found = {type(each).__name__: why(each, box, t_ns, engaged) for each in ALL}
    return {name: reason for name, reason in found.items() if reason is not Reason.NONE}


def test_nothing_stands_in_the_way_of_a_good_command() -> None:
    assert reasons_of(box_of()) == {}


@pytest.mark.parametrize(
    ("command", "reason"),
    [
        (PIVOT._replace(speed_rpm=0), Reason.BAD_FIELD),
        (PIVOT._replace(direction=0), Reason.BAD_FIELD),
        (PIVOT._replace(direction=2), Reason.BAD_FIELD),
        (PIVOT._replace(setting=0), Reason.BAD_FIELD),
        (PIVOT._replace(setting=9), Reason.BAD_FIELD),
        (HOP._replace(speed_rpm=0), Reason.BAD_FIELD),
        (TWIST._replace(direction=-2), Reason.BAD_FIELD),
        (SPIN._replace(speed_rpm=0), Reason.BAD_FIELD),
        (FLASH._replace(duration_ms=0), Reason.BAD_FIELD),
        (LOCK._replace(person=b""), Reason.BAD_FIELD),
        (LOCK._replace(person=bytes(12)), Reason.BAD_FIELD),
        (UNLOCK._replace(person=b""), Reason.BAD_FIELD),
        (GROUPS._replace(setting=99), Reason.BAD_FIELD),
        (GROUPS._replace(setting=SettingId.BATTERY_LOW_MV, value=2999), Reason.BAD_FIELD),
        (GROUPS._replace(setting=SettingId.CALIBRATION), Reason.READ_ONLY),
        (HOP, Reason.UNSUPPORTED),
        (TWIST, Reason.UNSUPPORTED),
        (PIVOT._replace(speed_rpm=9001), Reason.OVER_SPEED_LIMIT),
        (SPIN._replace(speed_rpm=-9001), Reason.OVER_SPEED_LIMIT),
        (SPIN._replace(speed_rpm=9000), Reason.NONE),
    ],
)
def test_fields_are_looked_at(command: Command, reason: Reason) -> None:
    assert why(command, box_of()) is reason


def both(reason: Reason) -> dict[str, Reason]:
    return {"Pivot": reason, "Spin": reason}


def test_a_latched_stop_blocks_wheels_and_nothing_else() -> None:
    box = box_of()
    box.latched = True
    assert reasons_of(box) == both(Reason.STOP_IN_FORCE)


def test_a_person_s_lock_blocks_wheels_and_other_persons() -> None:
    box = box_of()
    box.person = b"Ada"
    assert reasons_of(box) == both(Reason.LOCKED_OUT)
    assert why(LOCK._replace(person=b"Bo"), box) is Reason.LOCKED_OUT
    assert why(UNLOCK._replace(person=b"Bo"), box) is Reason.OTHER_PERSON
    assert why(UNLOCK._replace(person=b"Ada\0\0"), box) is Reason.NONE


def test_a_standing_fault_blocks_wheels() -> None:
    box = box_of()
    box.faults.stand(Fault.SENSOR_LOST, 0)
    assert reasons_of(box) == both(Reason.FAULT)


def test_without_its_clock_a_module_drives_nothing() -> None:
    box = box_of()
    box.boot = Boot(7, box.spec.identity, ModuleTime(0))
    assert reasons_of(box) == both(Reason.CLOCK_UNKNOWN)


def test_a_latest_start_counts_to_its_last_millisecond() -> None:
    box = box_of()
    early = PIVOT._replace(latest_ms=2_000)
    assert why(early, box, 2 * S) is Reason.NONE
    assert why(early, box, 2 * S + S // 1000) is Reason.TOO_LATE
    assert why(SPIN._replace(latest_ms=2**32 - 1), box) is Reason.TOO_LATE


def test_without_a_permit_no_wheel_turns() -> None:
    assert reasons_of(box_of(), 50 * S) == both(Reason.NO_PERMIT)


def test_a_busy_module_takes_nothing_but_what_takes_a_danger_away() -> None:
    box = box_of()
    box.drive.start_spin(3000, S, 0)
    busy = {**both(Reason.BUSY), "Flash": Reason.BUSY}
    assert reasons_of(box, S) == busy
    assert reasons_of(box_of(), engaged=True) == busy


def test_a_low_battery_blocks_wheels() -> None:
    assert reasons_of(box_of(charge=0.03)) == both(Reason.BATTERY_LOW)


def test_the_limits_are_those_of_the_settings() -> None:
    box = box_of()
    box.settings.write(SettingId.WHEEL_LIMIT_RPM, 3999)
    assert reasons_of(box) == both(Reason.OVER_SPEED_LIMIT)
    box.settings.write(SettingId.WHEEL_LIMIT_RPM, 4000)
    box.settings.write(SettingId.BATTERY_LOW_MV, 4200)
    assert reasons_of(box) == both(Reason.BATTERY_LOW)


def test_the_battery_is_looked_at_as_it_is_now() -> None:
    spec = replace(spec_of(PAVER, 1, 0.2), kind=replace(PAVER, cell_capacity_mAh=10.0))
    box = boxed(spec)
    assert why(PIVOT, box) is Reason.NONE
    # 0.18 W at 3.7 V are 49 mA: the 2 mAh left last about two and a half minutes.
    box.boot.allegiance.hear_permit(permit(200 * S), 200_000)
    assert why(PIVOT, box, 200 * S) is Reason.BATTERY_LOW


def test_what_takes_magnets_is_not_for_a_module_that_nothing_holds() -> None:
    held, free = box_of(), boxed(spec_of(replace(PAVER, held=False)))
    for setting in (Setting.WALL, Setting.CREST, Setting.FLAT):
        assert why(PIVOT._replace(setting=setting), free) is Reason.UNSUPPORTED
    for motion in (HOP, TWIST):
        assert why(motion, held) is Reason.UNSUPPORTED
    assert why(HOP, free) is Reason.NONE
    assert why(PIVOT._replace(setting=Setting.WALL), held) is Reason.NONE


def test_a_module_made_for_less_does_less() -> None:
    box = boxed(replace(spec_of(), able=frozenset({Deed.FLOOR})))
    assert why(PIVOT, box) is Reason.NONE
    assert why(PIVOT._replace(setting=Setting.WALL), box) is Reason.UNSUPPORTED


def test_flat_and_twist_need_the_axis_upright() -> None:
    """As spinning about a level axis lifts, and about an upright one only turns."""
    flat = PIVOT._replace(setting=Setting.FLAT)
    free = replace(PAVER, held=False)
    assert why(flat, box_of()) is Reason.AXIS_UPRIGHT
    assert why(flat, box_of(5)) is Reason.NONE
    assert why(TWIST, boxed(spec_of(free))) is Reason.AXIS_UPRIGHT
    assert why(TWIST, boxed(spec_of(free, 6))) is Reason.NONE
    assert why(HOP, boxed(spec_of(free, 6))) is Reason.AXIS_UPRIGHT


@pytest.mark.parametrize("face_up", [5, 6])
def test_an_upright_axis_blocks_a_pivot_but_no_spin(face_up: int) -> None:
    assert reasons_of(box_of(face_up)) == {"Pivot": Reason.AXIS_UPRIGHT}


def test_a_module_that_lies_on_no_face_takes_no_drive(monkeypatch: pytest.MonkeyPatch) -> None:
    leaning = MotionResult(0, 0.7, 0.8, 5.0, 0.01, 0.4, False)
    monkeypatch.setattr("sim_link.mechanics.pivot", lambda *_, **__: leaning)
    box = box_of()
    box.drive.body.brake(300.0, 1, 1, 0)
    assert reasons_of(box, 5 * S) == both(Reason.NOT_SETTLED)


def test_the_first_reason_wins_in_the_document_s_order() -> None:
    """WIRE.md, "The module's own interlocks": each cause taken away shows the next."""
    box = boxed(spec_of(PAVER, 5, 0.03))
    box.boot = Boot(7, box.spec.identity, ModuleTime(0))
    box.latched, box.person = True, b"Ada"
    box.faults.stand(Fault.WHEEL_STUCK, 0)
    box.drive.start_spin(3000, 60 * S, 0)
    fast = PIVOT._replace(speed_rpm=9999, latest_ms=0)
    seen = [
        why(HOP._replace(speed_rpm=0), box, S),
        why(HOP, box, S),
    ]
    for take_away in (
        lambda: None,
        lambda: setattr(box, "latched", False),
        lambda: setattr(box, "person", b""),
        lambda: setattr(box, "faults", Faults()),
        lambda: box.boot.allegiance.roll_call(EPOCH, CONSOLE, 0),
    ):
        take_away()
        seen.append(why(fast, box, S))
    box.boot.allegiance.hear_probe(Probe(CONSOLE, 7, 1, 1, 0, 5), 1_000)
    seen += [why(fast, box, S)]
    fast = fast._replace(latest_ms=LATEST_MS)
    seen += [why(fast, box, S)]
    box.boot.allegiance.hear_permit(permit(0), 1_000)
    seen += [why(fast, box, S)]
    box.drive.rest(S)
    box.drive.step()
    seen += [why(fast, box, S), why(fast._replace(speed_rpm=4000), box, S)]
    box.settings.write(SettingId.BATTERY_LOW_MV, 3000)
    seen += [why(fast._replace(speed_rpm=4000), box, S)]
    assert seen == [
        Reason.BAD_FIELD,
        Reason.UNSUPPORTED,
        Reason.STOP_IN_FORCE,
        Reason.LOCKED_OUT,
        Reason.FAULT,
        Reason.CLOCK_UNKNOWN,
        Reason.CLOCK_UNKNOWN,
        Reason.TOO_LATE,
        Reason.NO_PERMIT,
        Reason.BUSY,
        Reason.OVER_SPEED_LIMIT,
        Reason.BATTERY_LOW,
        Reason.AXIS_UPRIGHT,
    ]
