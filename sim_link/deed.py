"""Deeds: what a brake is applied for, and which of them a module is made for.

Owns the words between a command on the wire and the mechanics. Knows no wheel and no forces.
"""

from enum import Enum, auto
from typing import Final

from protocol.codes import Setting
from protocol.message import Hop, Motion, Pivot


class Deed(Enum):
    """What a brake is applied for: a pivot in one of its settings, a hop, or a twist."""

    FLOOR = auto()
    WALL = auto()
    CREST = auto()
    FLAT = auto()
    HOP = auto()
    TWIST = auto()

    @property
    def upright(self) -> bool:
        """Whether it needs the wheel axis upright; the others need it level."""
        return self in (Deed.FLAT, Deed.TWIST)


_SETTINGS: Final = {
    Setting.FLOOR: Deed.FLOOR,
    Setting.WALL: Deed.WALL,
    Setting.CREST: Deed.CREST,
    Setting.FLAT: Deed.FLAT,
}
HELD: Final = frozenset({Deed.FLOOR, Deed.WALL, Deed.CREST, Deed.FLAT})
"""What takes magnets that hold an edge; on the floor they do no harm."""
FREE: Final = frozenset({Deed.FLOOR, Deed.HOP, Deed.TWIST})
"""What a module can do that nothing holds."""


def deed_of(motion: Motion) -> Deed:
    """What the brake is to be applied for. Raises ValueError for a setting that there is not."""
    if isinstance(motion, Pivot):
        return _SETTINGS[Setting(motion.setting)]
    return Deed.HOP if isinstance(motion, Hop) else Deed.TWIST


def setting_of(deed: Deed) -> Setting:
    """The mechanics' setting of a deed about an edge. A hop is a floor pivot at a higher speed, by
    a module that nothing holds; a twist has none and counts as flat."""
    if deed is Deed.HOP:
        return Setting.FLOOR
    return next((setting for setting, known in _SETTINGS.items() if known is deed), Setting.FLAT)
