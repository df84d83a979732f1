"""What a module or a bridge sends: one declaration a message, field by field.

Owns the layouts and nothing else; what each end does with them is WIRE.md's. A declaration is
explained in layout.py.
"""

from typing import NamedTuple

from protocol.codes import Code
from protocol.layout import I8, I16, I32, U8, U16, U32, U64, Data24, Text12, declare


@declare(Code.PRESENCE)
class Presence(NamedTuple):
    """A module's answer to a roll call: who it is, whom it follows, what it remembers.

    ``owner_left_ms``: how long it follows nobody but ``console`` from now on; 0: anybody may
    call it over.
    """

    identity: U64
    boot: U32
    epoch: U32
    console: U32
    stop_number: U32
    time_ms: U32
    owner_left_ms: U16
    flags: U8
    face_up: U8


@declare(Code.NAMEPLATE)
class Nameplate(NamedTuple):
    """What is written on the box: name, kind, limits."""

    identity: U64
    wheel_max_rpm: U16
    firmware: U16
    name: Text12
    kind: Text12


@declare(Code.TELEMETRY)
class Telemetry(NamedTuple):
    """What a module measures of itself, unasked. ``face_up`` 1 to 4 turn about the wheel
    axis, 5 and 6 are its ends, 0 is none (tilted)."""

    boot: U32
    sequence: U16
    time_ms: U32
    activity: U8
    flags: U8
    face_up: U8
    wheel_rpm: I16
    battery_mV: U16
    temperature_cC: I16
    tilt_ddeg: I16
    identity_bits: U16


@declare(Code.ANSWER)
class Answer(NamedTuple):
    """What became of a command. ``expect_ms``: time until it should be finished."""

    epoch: U32
    boot: U32
    number: U16
    state: U8
    reason: U8
    expect_ms: U16


@declare(Code.FACTS)
class Facts(NamedTuple):
    """The end of a motion: what was measured of it. Verdicts are drawn by the console.

    ``reason`` is NONE for a motion that ran its course, else why it was cut short.
    Angles in tenths of a degree, positive in the ordered direction.
    """

    epoch: U32
    boot: U32
    number: U16
    reason: U8
    face_before: U8
    face_after: U8
    settled: U8
    turned_ddeg: I16
    peak_tilt_ddeg: I16
    peak_rate_dps: U16
    wheel_at_brake_rpm: U16
    brake_us: U32
    spin_up_ms: U16
    settle_ms: U16
    sag_mV: U16
    started_ms: U32


@declare(Code.STOPPED)
class Stopped(NamedTuple):
    """A module's confirmation of a stop or a clear: the newest stop it knows, and its state."""

    stop_number: U32
    latched: U8
    activity: U8
    wheel_rpm: I16
    boot: U32
    identity_bits: U16


@declare(Code.ECHO)
class Echo(NamedTuple):
    """Answer to a Probe: module time at which it was heard, and how long the answer took."""

    boot: U32
    sequence: U16
    identity_bits: U16
    received_us: U64
    held_us: U32


@declare(Code.LOCK_STATE)
class LockState(NamedTuple):
    """Who has locked the module out, if anybody has."""

    boot: U32
    identity_bits: U16
    locked: U8
    person: Text12


@declare(Code.SETTING_VALUE)
class SettingValue(NamedTuple):
    """One setting and what it may be. ``settings``: how many this module has.

    ``lowest`` above ``highest``: it has no such setting; both equal to ``value``: read only.
    """

    boot: U32
    identity_bits: U16
    setting: U8
    settings: U8
    value: I32
    lowest: I32
    highest: I32


@declare(Code.TRACE_CHUNK)
class TraceChunk(NamedTuple):
    """One chunk of a motion trace; trace.py reads the data. ``chunks`` 0: no such trace."""

    boot: U32
    number: U16
    identity_bits: U16
    chunk: U16
    chunks: U16
    data: Data24


@declare(Code.FAULT_NOTICE)
class FaultNotice(NamedTuple):
    """Something in the box is wrong (``standing`` 1), or is so no longer (0). Sent when it
    changes, and in answer to a roll call while it stands."""

    boot: U32
    identity_bits: U16
    fault: U8
    standing: U8
    time_ms: U32
    detail: I16


@declare(Code.BRIDGE_STATUS)
class BridgeStatus(NamedTuple):
    """Answer to BridgeAsk. Counts are since its start; ``queue``: frames that wait for the air,
    now and at most so far."""

    sequence: U16
    uptime_ms: U32
    frames_from_console: U32
    frames_to_console: U32
    dropped: U32
    queue: U16
    queue_most: U16
    signal_dBm: I8
    noise_dBm: I8


Report = (
    Presence
    | Nameplate
    | Telemetry
    | Answer
    | Facts
    | Stopped
    | Echo
    | LockState
    | SettingValue
    | TraceChunk
    | FaultNotice
    | BridgeStatus
)
