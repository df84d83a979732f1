"""What use does to a module: a brake that fades, magnets that weaken, a bearing that drags, a cell
that ages.

Owns how much of each is left after so many motions, as pure functions of a count (and, for a brake,
of its temperature). Knows nothing of how a motion is made, and keeps no count: drive.py does. A
module without a fault of wear does not change with use, and its brake not with its temperature.

The shipped rates are invented. Each is so slow that its change over a hundred motions drowns in the
scatter from one motion to the next, and a trend over three hundred shows it. Age alone is left out:
what a part loses on the shelf takes months, and no session lasts so long.
"""

from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from enum import IntEnum
from types import MappingProxyType
from typing import Final, TypeVar

from sim_link.fault_kinds import FaultKind
from sim_link.kinds import Kind

_T = TypeVar("_T")


class Wearing(IntEnum):
    """What can wear, and can be changed for a new one."""

    BRAKE = 0
    MAGNETS = 1
    BEARING = 2
    CELL = 3


SHIPPED_RATES: Final[Mapping[Wearing, float]] = MappingProxyType(
    {
        Wearing.BRAKE: 1.0e-4,
        Wearing.MAGNETS: 4.0e-4,
        Wearing.BEARING: 5.0e-5,
        Wearing.CELL: 1.5e-4,
    }
)
"""Part lost a motion where the fault of that wear is on: of the brake's torque, of the magnets', of
the motor's torque to the bearing; and by so much a cell's resistance rises."""
WEARING: Final[Mapping[FaultKind, Wearing]] = MappingProxyType(
    {
        FaultKind.FADING_BRAKE: Wearing.BRAKE,
        FaultKind.WEAK_MAGNETS: Wearing.MAGNETS,
        FaultKind.DRAGGING_BEARING: Wearing.BEARING,
        FaultKind.AGEING_CELL: Wearing.CELL,
    }
)
"""The faults of wear, and what wears by them."""

MOST_DRAG: Final = 0.5
"""A bearing takes no more than this of the motor's torque, however worn: beyond, it is stuck."""
_CAPACITY_PART: Final = 0.5
"""A cell's capacity falls by this part of what its resistance rises by."""
_FADE_FROM_C: Final = 40.0
_FADE_A_K: Final = 1.0e-3
"""Part of its torque that a fading brake loses with each kelvin above, until it cools."""
_FADE_LEAST: Final = 0.5


@dataclass(frozen=True, slots=True)
class Wear:
    """How one module wears. ``rates``: by part, 0 where it does not wear; ``since``: the count of
    motions at which each part was new. Both in the order of Wearing."""

    rates: tuple[float, ...] = (0.0,) * len(Wearing)
    since: tuple[int, ...] = (0,) * len(Wearing)

    @classmethod
    def of(cls, faults: Collection[FaultKind]) -> "Wear":
        """The wear of a module that has these faults from the start on."""
        wear = cls()
        for kind, part in WEARING.items():
            if kind in faults:
                wear = wear.begin(part, 0)
        return wear

    def begin(self, part: Wearing, motions: int) -> "Wear":
        """Return the wear where a part, new so far, wears at its shipped rate from now on."""
        rates = _with(self.rates, part, SHIPPED_RATES[part])
        return replace(self, rates=rates, since=_with(self.since, part, motions))

    def end(self, part: Wearing) -> "Wear":
        """Return the wear where a part no longer wears, and is as new."""
        return replace(self, rates=_with(self.rates, part, 0.0))

    def renew(self, part: Wearing, motions: int) -> "Wear":
        """Return the wear where a part was changed for a new one, which wears likewise."""
        return replace(self, since=_with(self.since, part, motions))

    def worn_kind(self, kind: Kind, motions: int, brake_C: float) -> Kind:
        """Return the kind with brake and magnets as they are after so many motions of the module.

        ``brake_C``: the brake's temperature as it is applied. Pure, and the same object where
        neither of the two wears; made for one call at each braking.
        """
        brake, magnets = self.rates[Wearing.BRAKE], self.rates[Wearing.MAGNETS]
        if not brake and not magnets:
            return kind
        left = self._left(Wearing.BRAKE, motions)
        if brake:
            left *= max(_FADE_LEAST, 1.0 - _FADE_A_K * max(0.0, brake_C - _FADE_FROM_C))
        return replace(
            kind,
            brake_torque_N_m=kind.brake_torque_N_m * left,
            magnet_torque_N_m=kind.magnet_torque_N_m * self._left(Wearing.MAGNETS, motions),
        )

    def drag_part(self, motions: int) -> float:
        """Return what part of the motor's torque a worn bearing takes, 0 to MOST_DRAG."""
        return min(MOST_DRAG, self._worn(Wearing.BEARING, motions))

    def cell_ohm(self, motions: int) -> float:
        """Return by what factor the cell's resistances have risen."""
        return 1.0 + self._worn(Wearing.CELL, motions)

    def cell_capacity(self, motions: int) -> float:
        """Return what part of its capacity the cell still has."""
        return 1.0 / (1.0 + _CAPACITY_PART * self._worn(Wearing.CELL, motions))

    def _worn(self, part: Wearing, motions: int) -> float:
        return self.rates[part] * max(0, motions - self.since[part])

    def _left(self, part: Wearing, motions: int) -> float:
        """What is left where a part of what is left goes with each motion, ever more slowly."""
        return 1.0 / (1.0 + self._worn(part, motions))


def _with(values: tuple[_T, ...], place: int, value: _T) -> tuple[_T, ...]:
    return (*values[:place], value, *values[place + 1 :])
