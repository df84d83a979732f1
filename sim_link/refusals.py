"""A module's own interlocks: why it refuses a command that reached it in good order.

Owns the table of conditions, in the order in which they are looked at. Knows nothing of
numbers and memory: the envelope of a command was judged before (command_memory.py).
A rest is in no row: it is never blocked.
"""

from collections.abc import Callable
from typing import Any, Final, NamedTuple, cast

from protocol.codes import Activity, Direction, Reason, Setting
from protocol.message import Command, Flash, Pivot, Spin
from sim_link.drive import Drive


class _Refusal(NamedTuple):
    """One interlock: the commands it concerns, and when it blocks them."""

    reason: Reason
    concerns: tuple[type[Any], ...]
    blocks: Callable[[Command, Drive, bool, int], bool]


def refusal(command: Command, drive: Drive, latched: bool, t_ns: int) -> Reason:
    """Return the first reason against carrying out ``command`` at ``t_ns``, or NONE."""
    for row in _REFUSALS:
        if isinstance(command, row.concerns) and row.blocks(command, drive, latched, t_ns):
            return row.reason
    return Reason.NONE


def _bad_pivot(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    pivot = cast(Pivot, command)
    return (
        pivot.speed_rpm == 0
        or pivot.direction not in tuple(Direction)
        or pivot.setting not in tuple(Setting)
    )


def _bad_spin(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return cast(Spin, command).speed_rpm == 0


def _bad_flash(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return cast(Flash, command).duration_ms == 0


def _other_setting(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return cast(Pivot, command).setting != Setting.FLOOR


def _stop_in_force(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return latched


def _busy(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return drive.activity is not Activity.STILL


def _over_speed(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return abs(cast(Pivot | Spin, command).speed_rpm) > drive.wheel_max_rpm


def _battery_low(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    drive.supply.account(t_ns)
    return drive.supply.battery.low


def _axis_upright(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return drive.body.posture(t_ns).face_up > 4


def _not_settled(command: Command, drive: Drive, latched: bool, t_ns: int) -> bool:
    return not drive.body.posture(t_ns).settled


_WHEEL: Final = (Pivot, Spin)

_REFUSALS: Final = (
    _Refusal(Reason.BAD_FIELD, (Pivot,), _bad_pivot),
    _Refusal(Reason.BAD_FIELD, (Spin,), _bad_spin),
    _Refusal(Reason.BAD_FIELD, (Flash,), _bad_flash),
    _Refusal(Reason.SETTING_UNSUPPORTED, (Pivot,), _other_setting),
    _Refusal(Reason.STOP_IN_FORCE, _WHEEL, _stop_in_force),
    _Refusal(Reason.BUSY, (Pivot, Spin, Flash), _busy),
    _Refusal(Reason.OVER_SPEED_LIMIT, _WHEEL, _over_speed),
    _Refusal(Reason.BATTERY_LOW, _WHEEL, _battery_low),
    _Refusal(Reason.AXIS_UPRIGHT, (Pivot,), _axis_upright),
    _Refusal(Reason.NOT_SETTLED, _WHEEL, _not_settled),
)
