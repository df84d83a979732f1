"""Wire codes: every number that has a name on the wire, and the addresses.

Owns the meaning of single numbers. Knows no layouts (message.py) and no framing (frame.py).
All codes are ours; a code once given is never given another meaning.
"""

from enum import IntEnum, IntFlag, unique
from typing import Final

WIRE_VERSION: Final = 1

CONSOLE_ADDRESS: Final = 0x0001
BRIDGE_ADDRESS: Final = 0x0002
FIRST_MODULE_ADDRESS: Final = 0x0010
LAST_MODULE_ADDRESS: Final = 0xEFFF
FIRST_GROUP_ADDRESS: Final = 0xF000
GROUPS: Final = 32
"""How many groups there are: as many as a setting has bits."""
EVERYONE_ADDRESS: Final = 0xFFFF

SIMULATED_BIT: Final = 1 << 63
"""Bit of the 64-bit identity that marks a module as simulated, wherever it goes."""


def is_simulated(identity: int) -> bool:
    """Say whether a 64-bit identity carries the simulated mark."""
    return bool(identity & SIMULATED_BIT)


def identity_bits(identity: int) -> int:
    """Return the low 16 bits of an identity: what a command carries of it."""
    return identity & 0xFFFF


def concerns(destination: int, address: int, groups: int) -> bool:
    """Say whether a frame to ``destination`` is meant for the module at ``address``, which is in
    the groups of the bits of ``groups``: for it alone, for one of its groups, or for everyone."""
    if destination in (address, EVERYONE_ADDRESS):
        return True
    group = destination - FIRST_GROUP_ADDRESS
    return 0 <= group < GROUPS and bool(groups >> group & 1)


@unique
class Code(IntEnum):
    """Which message a payload is. Bit 7: sent by a module or a bridge; 0x10 to 0x1f: numbered
    commands."""

    ROLL_CALL = 0x01
    QUERY = 0x02
    PROBE = 0x03
    PERMIT = 0x04
    RELEASE = 0x05
    GO = 0x06
    SETTING_ASK = 0x07
    TRACE_ASK = 0x08
    BRIDGE_ASK = 0x09
    SLOT = 0x0A
    PIVOT = 0x10
    SPIN = 0x11
    REST = 0x12
    FLASH = 0x13
    HOP = 0x14
    TWIST = 0x15
    LOCK_OUT = 0x16
    UNLOCK = 0x17
    SETTING_WRITE = 0x18
    STOP = 0x20
    CLEAR = 0x21
    PRESENCE = 0x81
    NAMEPLATE = 0x82
    TELEMETRY = 0x83
    ANSWER = 0x84
    FACTS = 0x85
    STOPPED = 0x86
    ECHO = 0x87
    LOCK_STATE = 0x88
    SETTING_VALUE = 0x89
    TRACE_CHUNK = 0x8A
    FAULT_NOTICE = 0x8B
    BRIDGE_STATUS = 0x8C


@unique
class AnswerState(IntEnum):
    """What a module says of a numbered command."""

    ACCEPTED = 1
    REFUSED = 2
    FINISHED = 3
    CUT = 4
    UNKNOWN = 5


@unique
class Reason(IntEnum):
    """Why a module refused a command, or cut one short. NONE where neither is the case."""

    NONE = 0
    OTHER_BOOT = 1
    OTHER_EPOCH = 2
    OTHER_IDENTITY = 3
    NUMBER_PASSED = 4
    BUSY = 5
    STOP_IN_FORCE = 6
    OVER_SPEED_LIMIT = 7
    BATTERY_LOW = 8
    AXIS_UPRIGHT = 9
    NOT_SETTLED = 10
    UNSUPPORTED = 11
    STOPPED = 12
    RESTED = 13
    BAD_FIELD = 14
    OWNED = 15
    TOO_LATE = 16
    CLOCK_UNKNOWN = 17
    NO_PERMIT = 18
    PERMIT_LAPSED = 19
    LOCKED_OUT = 20
    OTHER_PERSON = 21
    READ_ONLY = 22
    FAULT = 23


@unique
class Setting(IntEnum):
    """Setting of a pivot: what the module stands on and turns about."""

    FLOOR = 1
    WALL = 2
    CREST = 3
    FLAT = 4


@unique
class Direction(IntEnum):
    """Sense of a motion about the wheel axis; forward turns face 1 up into face 2 up."""

    FORWARD = 1
    BACK = -1


@unique
class Activity(IntEnum):
    """What a module does at this moment."""

    STILL = 0
    SPINNING_UP = 1
    HOLDING = 2
    RESTING = 3
    BRAKING = 4
    SETTLING = 5
    FLASHING = 6
    STAGED = 7


class Flags(IntFlag):
    """Standing conditions that a module reports with its telemetry."""

    LATCHED = 1
    """All-stop in force."""
    BATTERY_LOW = 2
    UNSETTLED = 4
    LOCKED_OUT = 8
    FAULTY = 16
    """A fault stands; see Fault."""
    PERMITTED = 32
    """It holds a drive permit."""
    CLOCK_TOLD = 64
    """The console that it follows has told it what it makes of its clock."""


@unique
class Fault(IntEnum):
    """What a module notices to be wrong with itself."""

    WATCHDOG = 1
    BROWN_OUT = 2
    SENSOR_LOST = 3
    WHEEL_STUCK = 4
    STORAGE_BAD = 5
    OVERHEATED = 6
    BRAKE_WEAK = 7


@unique
class SettingId(IntEnum):
    """What a module lets a console read, and mostly change: its settings, counted from 1."""

    WHEEL_LIMIT_RPM = 1
    TELEMETRY_PERIOD_MS = 2
    BATTERY_LOW_MV = 3
    GROUPS = 4
    """One bit a group: bit 0 for the first."""
    CALIBRATION = 5
    """Version of the calibration; read only."""
