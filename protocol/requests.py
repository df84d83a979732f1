"""What a console sends: one declaration a message, field by field.

Owns the layouts and nothing else; what each end does with them is WIRE.md's. A declaration is
explained in layout.py. Numbered commands begin with the same four fields, their envelope.
"""

from typing import Final, NamedTuple

from protocol.codes import Code
from protocol.layout import I8, I16, I32, U8, U16, U32, Text12, declare

BOUND_UNKNOWN: Final = 0xFFFF
"""``bound_ms`` of a Probe whose console does not know the module's clock yet."""


@declare(Code.ROLL_CALL)
class RollCall(NamedTuple):
    """Asks who is there, and offers a console epoch: allegiance.py says who adopts it.

    Answered by Presence, Nameplate and what stands: lock-out, faults. ``console`` is drawn at
    random for each session, so that two consoles are told apart, even of one epoch.
    """

    epoch: U32
    console: U32


@declare(Code.QUERY)
class Query(NamedTuple):
    """Asks again for the answer to a command; never causes it to be carried out."""

    epoch: U32
    boot: U32
    number: U16


@declare(Code.PROBE)
class Probe(NamedTuple):
    """Asks for the module's clock, and tells it what the console makes of that clock so far.

    ``offset_ms``: module time less fleet time, modulo 2**32; ``bound_ms``: how far that may be
    wrong, BOUND_UNKNOWN before the first answer. Answered by Echo.
    """

    console: U32
    boot: U32
    sequence: U16
    identity_bits: U16
    offset_ms: U32
    bound_ms: U16


@declare(Code.PERMIT)
class Permit(NamedTuple):
    """The drive permit, to all modules that follow ``console``: wheels may turn until
    ``expiry_ms`` of fleet time. An older one that comes late changes nothing."""

    console: U32
    expiry_ms: U32


@declare(Code.RELEASE)
class Release(NamedTuple):
    """The console lets go: the permit ends now, and another console may be followed."""

    console: U32


@declare(Code.GO)
class Go(NamedTuple):
    """Staged motions of this stage begin at ``start_ms`` of fleet time. One that comes after
    that time starts nothing."""

    console: U32
    stage: U8
    start_ms: U32


@declare(Code.SETTING_ASK)
class SettingAsk(NamedTuple):
    """Asks for one setting. Answered by SettingValue."""

    setting: U8


@declare(Code.TRACE_ASK)
class TraceAsk(NamedTuple):
    """Asks for chunks of the motion trace of one command: bit ``i`` of ``wanted`` is chunk
    ``first`` + i. Answered by a TraceChunk each."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    first: U16
    wanted: U32


@declare(Code.BRIDGE_ASK)
class BridgeAsk(NamedTuple):
    """Asks the bridge how it is. A transparent modem does not answer. See BridgeStatus."""

    sequence: U16


@declare(Code.SLOT)
class Slot(NamedTuple):
    """Gives the module its telemetry slot: it reports where fleet time modulo ``period_ms`` is
    ``phase_ms``, for as long as it follows ``console``. ``period_ms`` 0: no slot any more. Not
    answered; where the module's telemetry falls shows whether it was heard."""

    console: U32
    boot: U32
    period_ms: U16
    identity_bits: U16
    phase_ms: U16


@declare(Code.PIVOT)
class Pivot(NamedTuple):
    """Command: spin up to ``speed_rpm`` so that braking turns the body in ``direction``.

    ``latest_ms``: module time after which it must not start. ``stage`` 0: it starts at once;
    else it waits for the Go of that stage.
    """

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    latest_ms: U32
    stage: U8
    setting: U8
    direction: I8
    speed_rpm: U16


@declare(Code.SPIN)
class Spin(NamedTuple):
    """Command: bring the wheel to a signed speed, hold it so long, then rest gently."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    latest_ms: U32
    speed_rpm: I16
    hold_ms: U16


@declare(Code.REST)
class Rest(NamedTuple):
    """Command: bring the wheel gently to a stop with the motor. Never blocked."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16


@declare(Code.FLASH)
class Flash(NamedTuple):
    """Command: light and beep for a time, so that a person can find the box."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    duration_ms: U16


@declare(Code.HOP)
class Hop(NamedTuple):
    """Command: spin up to ``speed_rpm`` so that braking throws the body off the floor."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    latest_ms: U32
    stage: U8
    direction: I8
    speed_rpm: U16


@declare(Code.TWIST)
class Twist(NamedTuple):
    """Command: spin up to ``speed_rpm`` so that braking turns the body about an upright axis."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    latest_ms: U32
    stage: U8
    direction: I8
    speed_rpm: U16


@declare(Code.LOCK_OUT)
class LockOut(NamedTuple):
    """Command: rest the wheel and drive it no more, over restarts too, until the same person
    takes the lock off. Never blocked."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    person: Text12


@declare(Code.UNLOCK)
class Unlock(NamedTuple):
    """Command: take the lock off. Refused unless it names the person who put it on."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    person: Text12


@declare(Code.SETTING_WRITE)
class SettingWrite(NamedTuple):
    """Command: change one setting, kept over restarts. Verified by asking for it again."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    setting: U8
    value: I32


@declare(Code.STOP)
class Stop(NamedTuple):
    """All-stop number so-and-so: every wheel to rest, latched. Harmless to repeat."""

    stop_number: U32


@declare(Code.CLEAR)
class Clear(NamedTuple):
    """Lifts the all-stop of this number, and only if it is the newest the module knows."""

    stop_number: U32


Motion = Pivot | Hop | Twist
"""What brakes the wheel: has a stage, and ends with facts."""
Drive = Motion | Spin
"""What turns the wheel: has a latest start, and needs a permit."""
Command = Drive | Rest | Flash | LockOut | Unlock | SettingWrite
"""What has a number, and is carried out at most once."""
Request = (
    Command
    | RollCall
    | Query
    | Probe
    | Permit
    | Release
    | Go
    | SettingAsk
    | TraceAsk
    | BridgeAsk
    | Slot
    | Stop
    | Clear
)
