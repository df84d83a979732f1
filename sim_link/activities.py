"""What a drive can be doing, and every change from one activity to another.

Owns the one table of both. Knows nothing of how long an activity lasts or what it does: drive.py.
"""

from collections.abc import Mapping
from enum import Enum, auto
from typing import Final

from protocol.codes import Activity


class Cue(Enum):
    """What makes a drive change its activity."""

    DRIVE = auto()
    FLASH = auto()
    REST = auto()
    BRAKE_DUE = auto()
    HOLD_DUE = auto()
    DUE = auto()


NEXT_ACTIVITY: Final[Mapping[tuple[Activity, Cue], Activity]] = {
    (Activity.STILL, Cue.DRIVE): Activity.SPINNING_UP,
    (Activity.STILL, Cue.FLASH): Activity.FLASHING,
    (Activity.SPINNING_UP, Cue.BRAKE_DUE): Activity.BRAKING,
    (Activity.SPINNING_UP, Cue.HOLD_DUE): Activity.HOLDING,
    (Activity.SPINNING_UP, Cue.REST): Activity.RESTING,
    (Activity.HOLDING, Cue.DUE): Activity.RESTING,
    (Activity.HOLDING, Cue.REST): Activity.RESTING,
    (Activity.RESTING, Cue.DUE): Activity.STILL,
    (Activity.BRAKING, Cue.DUE): Activity.SETTLING,
    (Activity.SETTLING, Cue.DUE): Activity.STILL,
    (Activity.FLASHING, Cue.DUE): Activity.STILL,
}
"""Every change of activity there is; a cue that is not here changes nothing. So a brake once
engaged stays engaged: BRAKING and SETTLING know no REST."""
