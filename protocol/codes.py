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
EVERYONE_ADDRESS: Final = 0xFFFF

SIMULATED_BIT: Final = 1 << 63
"""Bit of the 64-bit identity that marks a module as simulated, wherever it goes."""


def is_simulated(identity: int) -> bool:
    """Say whether a 64-bit identity carries the simulated mark."""
    return bool(identity & SIMULATED_BIT)


def identity_bits(identity: int) -> int:
    """Return the low 16 bits of an identity: what a command carries of it."""
    return identity & 0xFFFF


@unique
class Code(IntEnum):
    """First body-describing byte of a frame: which message it is. Bit 7: sent by a module."""

    ROLL_CALL = 0x01
    QUERY = 0x02
    PIVOT = 0x10
    SPIN = 0x11
    REST = 0x12
    FLASH = 0x13
    STOP = 0x20
    CLEAR = 0x21
    PRESENCE = 0x81
    NAMEPLATE = 0x82
    TELEMETRY = 0x83
    ANSWER = 0x84
    FACTS = 0x85
    STOPPED = 0x86


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
    SETTING_UNSUPPORTED = 11
    STOPPED = 12
    RESTED = 13
    BAD_FIELD = 14


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


class Flags(IntFlag):
    """Standing conditions that a module reports with its telemetry."""

    LATCHED = 1
    """All-stop in force."""
    BATTERY_LOW = 2
    UNSETTLED = 4
