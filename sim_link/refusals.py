"""A module's own interlocks: why it refuses a command that reached it in good order.

Owns the table of conditions, in the order in which they are looked at: that of WIRE.md, "The
module's own interlocks". Knows nothing of numbers and memory: the envelope of a command was
judged before (command_memory.py). A rest is in no row: it is never blocked.
"""

from collections.abc import Callable
from typing import Any, Final, NamedTuple, cast

from protocol.allegiance import ms_until
from protocol.codes import Activity, Direction, Reason, Setting, SettingId
from protocol.message import (
    Command,
    Drive,
    Flash,
    Hop,
    LockOut,
    Motion,
    Pivot,
    SettingWrite,
    Spin,
    Twist,
    Unlock,
)
from sim_link.box import Box
from sim_link.deed import FREE, HELD, deed_of


class Look(NamedTuple):
    """What an interlock looks at. ``engaged``: whether a command is under way or staged."""

    command: Command
    box: Box
    engaged: bool
    t_ns: int


class _Refusal(NamedTuple):
    """One interlock: the commands it concerns, and when it blocks them."""

    reason: Reason
    concerns: tuple[type[Any], ...]
    blocks: Callable[[Look], bool]


def refusal(look: Look) -> Reason:
    """Return the first reason against carrying out a command now, or NONE."""
    for row in _REFUSALS:
        if isinstance(look.command, row.concerns) and row.blocks(look):
            return row.reason
    if isinstance(look.command, SettingWrite):
        return look.box.settings.refusal(look.command.setting, look.command.value)
    return Reason.NONE


def _bad_motion(look: Look) -> bool:
    motion = cast(Motion, look.command)
    return motion.speed_rpm == 0 or motion.direction not in tuple(Direction)


def _bad_setting(look: Look) -> bool:
    return cast(Pivot, look.command).setting not in tuple(Setting)


def _bad_spin(look: Look) -> bool:
    spin = cast(Spin, look.command)
    return spin.speed_rpm == 0 or spin.hold_ms == 0


def _bad_flash(look: Look) -> bool:
    return cast(Flash, look.command).duration_ms == 0


def _nobody(look: Look) -> bool:
    return not cast(LockOut | Unlock, look.command).person.rstrip(b"\0")


def _unsupported(look: Look) -> bool:
    """A wall, a crest or a neighbour's edge takes magnets; a hop or a twist is for a module that
    nothing holds."""
    spec = look.box.spec
    able = spec.able or (HELD if spec.kind.held else FREE)
    return deed_of(cast(Motion, look.command)) not in able


def _stop_in_force(look: Look) -> bool:
    return look.box.latched


def _locked_out(look: Look) -> bool:
    return bool(look.box.person)


def _locked_by_another(look: Look) -> bool:
    person = cast(LockOut, look.command).person.rstrip(b"\0")
    return look.box.person not in (b"", person)


def _not_the_person(look: Look) -> bool:
    person = cast(Unlock, look.command).person.rstrip(b"\0")
    return look.box.person not in (b"", person)


def _fault(look: Look) -> bool:
    return bool(look.box.faults)


def _clock_unknown(look: Look) -> bool:
    return not look.box.boot.allegiance.clock_told


def _too_late(look: Look) -> bool:
    latest_ms = cast(Drive, look.command).latest_ms
    return ms_until(latest_ms, look.box.boot.time.ms(look.t_ns)) < 0


def _no_permit(look: Look) -> bool:
    return not look.box.boot.permitted(look.t_ns)


def _busy(look: Look) -> bool:
    return look.engaged or look.box.drive.activity is not Activity.STILL


def _over_speed(look: Look) -> bool:
    limit_rpm = look.box.settings.value(SettingId.WHEEL_LIMIT_RPM)
    return abs(cast(Drive, look.command).speed_rpm) > limit_rpm


def _battery_low(look: Look) -> bool:
    return look.box.battery_low(look.t_ns)


def _axis_wrong(look: Look) -> bool:
    """On no face, the axis stands no way at all, and the last line refuses."""
    face_up = look.box.drive.body.posture(look.t_ns).face_up
    upright = deed_of(cast(Motion, look.command)).upright
    return (1 <= face_up <= 4) if upright else face_up > 4


def _not_settled(look: Look) -> bool:
    return not look.box.drive.body.posture(look.t_ns).settled


_BRAKED: Final = (Pivot, Hop, Twist)
_WHEEL: Final = (*_BRAKED, Spin)

_REFUSALS: Final = (
    _Refusal(Reason.BAD_FIELD, _BRAKED, _bad_motion),
    _Refusal(Reason.BAD_FIELD, (Pivot,), _bad_setting),
    _Refusal(Reason.BAD_FIELD, (Spin,), _bad_spin),
    _Refusal(Reason.BAD_FIELD, (Flash,), _bad_flash),
    _Refusal(Reason.BAD_FIELD, (LockOut, Unlock), _nobody),
    _Refusal(Reason.UNSUPPORTED, _BRAKED, _unsupported),
    _Refusal(Reason.STOP_IN_FORCE, _WHEEL, _stop_in_force),
    _Refusal(Reason.LOCKED_OUT, _WHEEL, _locked_out),
    _Refusal(Reason.LOCKED_OUT, (LockOut,), _locked_by_another),
    _Refusal(Reason.OTHER_PERSON, (Unlock,), _not_the_person),
    _Refusal(Reason.FAULT, _WHEEL, _fault),
    _Refusal(Reason.CLOCK_UNKNOWN, _WHEEL, _clock_unknown),
    _Refusal(Reason.TOO_LATE, _WHEEL, _too_late),
    _Refusal(Reason.NO_PERMIT, _WHEEL, _no_permit),
    _Refusal(Reason.BUSY, (*_WHEEL, Flash), _busy),
    _Refusal(Reason.OVER_SPEED_LIMIT, _WHEEL, _over_speed),
    _Refusal(Reason.BATTERY_LOW, _WHEEL, _battery_low),
    _Refusal(Reason.AXIS_UPRIGHT, _BRAKED, _axis_wrong),
    _Refusal(Reason.NOT_SETTLED, _WHEEL, _not_settled),
)
