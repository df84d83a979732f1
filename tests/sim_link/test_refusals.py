"""A module's own interlocks: each by itself, their order, and that rest is in none."""

from dataclasses import replace

import pytest

from protocol.codes import Reason
from protocol.message import Command, Flash, Pivot, Rest, Spin
from sim_link.drive import Drive
from sim_link.mechanics import MotionResult
from sim_link.randomness import Draws
from sim_link.refusals import refusal
from tests.support.virtual_console import PAVER, S, spec_of

PIVOT = Pivot(1, 1, 1, 1, 1, 1, 4000)
SPIN = Spin(1, 1, 1, 1, -4000, 100)
REST = Rest(1, 1, 1, 1)
FLASH = Flash(1, 1, 1, 1, 100)


def drive_of(face_up: int = 1, charge: float = 0.95) -> Drive:
    spec = spec_of(PAVER, face_up, charge)
    return Drive(spec, Draws(3, spec.identity))


@pytest.mark.parametrize("command", [PIVOT, SPIN, REST, FLASH])
def test_nothing_stands_in_the_way_of_a_good_command(command: Command) -> None:
    assert refusal(command, drive_of(), False, 0) is Reason.NONE


@pytest.mark.parametrize(
    ("command", "reason"),
    [
        (PIVOT._replace(speed_rpm=0), Reason.BAD_FIELD),
        (PIVOT._replace(direction=0), Reason.BAD_FIELD),
        (PIVOT._replace(direction=2), Reason.BAD_FIELD),
        (PIVOT._replace(setting=0), Reason.BAD_FIELD),
        (PIVOT._replace(setting=9), Reason.BAD_FIELD),
        (SPIN._replace(speed_rpm=0), Reason.BAD_FIELD),
        (FLASH._replace(duration_ms=0), Reason.BAD_FIELD),
        (PIVOT._replace(setting=2), Reason.SETTING_UNSUPPORTED),
        (PIVOT._replace(setting=4), Reason.SETTING_UNSUPPORTED),
        (PIVOT._replace(speed_rpm=9001), Reason.OVER_SPEED_LIMIT),
        (SPIN._replace(speed_rpm=-9001), Reason.OVER_SPEED_LIMIT),
        (SPIN._replace(speed_rpm=9000), Reason.NONE),
    ],
)
def test_fields_are_looked_at(command: Command, reason: Reason) -> None:
    assert refusal(command, drive_of(), False, 0) is reason


def test_a_latched_stop_blocks_wheels_and_nothing_else() -> None:
    reasons = [refusal(command, drive_of(), True, 0) for command in (PIVOT, SPIN, FLASH, REST)]
    assert reasons == [Reason.STOP_IN_FORCE, Reason.STOP_IN_FORCE, Reason.NONE, Reason.NONE]


def test_a_busy_module_takes_nothing_but_a_rest() -> None:
    drive = drive_of()
    drive.start_spin(3000, S, 0)
    reasons = [refusal(command, drive, False, S) for command in (PIVOT, SPIN, FLASH, REST)]
    assert reasons == [Reason.BUSY] * 3 + [Reason.NONE]


def test_a_low_battery_blocks_wheels() -> None:
    drive = drive_of(charge=0.03)
    reasons = [refusal(command, drive, False, 0) for command in (PIVOT, SPIN, FLASH, REST)]
    assert reasons == [Reason.BATTERY_LOW, Reason.BATTERY_LOW, Reason.NONE, Reason.NONE]


def test_the_battery_is_looked_at_as_it_is_now() -> None:
    spec = replace(spec_of(PAVER, 1, 0.2), kind=replace(PAVER, cell_capacity_mAh=10.0))
    drive = Drive(spec, Draws(3, spec.identity))
    assert refusal(PIVOT, drive, False, 0) is Reason.NONE
    # 0.18 W at 3.7 V are 49 mA: the 2 mAh left last about two and a half minutes.
    assert refusal(PIVOT, drive, False, 200 * S) is Reason.BATTERY_LOW


@pytest.mark.parametrize("face_up", [5, 6])
def test_an_upright_axis_blocks_a_pivot_but_no_spin(face_up: int) -> None:
    drive = drive_of(face_up)
    assert refusal(PIVOT, drive, False, 0) is Reason.AXIS_UPRIGHT
    assert refusal(SPIN, drive, False, 0) is Reason.NONE


def test_a_module_that_lies_on_no_face_takes_no_drive(monkeypatch: pytest.MonkeyPatch) -> None:
    leaning = MotionResult(0, 0.7, 0.8, 5.0, 0.01, 0.4, False)
    monkeypatch.setattr("sim_link.mechanics.floor_pivot", lambda *_: leaning)
    drive = drive_of()
    drive.body.brake(300.0, 1, 1, 0)
    reasons = [refusal(command, drive, False, 5 * S) for command in (PIVOT, SPIN, FLASH, REST)]
    assert reasons == [Reason.NOT_SETTLED, Reason.NOT_SETTLED, Reason.NONE, Reason.NONE]


def test_the_first_reason_wins() -> None:
    drive = drive_of(charge=0.03)
    fast = PIVOT._replace(speed_rpm=9999)
    assert refusal(fast, drive, True, 0) is Reason.STOP_IN_FORCE
    assert refusal(fast, drive, False, 0) is Reason.OVER_SPEED_LIMIT
    assert refusal(fast._replace(setting=3), drive, True, 0) is Reason.SETTING_UNSUPPORTED
