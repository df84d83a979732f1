"""How warm a module is: its box, and the motor and the brake in it.

Owns three lumps. Motor and brake give their warmth to the box, the box gives its own to the hall,
each with a time constant; whatever is given arrives. Knows nothing of what makes the heat: it is
told joules and when. What the lumps get back from a box that is warmer than they is left out.
"""

from enum import IntEnum
from math import exp
from typing import Final

AMBIENT_C: Final = 21.0
"""Temperature of the invented hall."""
HOT_C: Final = 70.0
"""A motor or a brake above this is too hot to drive: windings and linings stand some more (common
practice of the trade: 120 degrees and up), magnets beside them do not."""
COOL_C: Final = 55.0
"""Below this it may be driven again."""
BOX_J_K: Final = 420.0
"""About 0.6 kg of mostly metal and plastic."""
BOX_S: Final = 900.0
"""Time constant with which a sealed box of this size loses its warmth to still air."""


class Part(IntEnum):
    """What becomes warm."""

    BOX = 0
    MOTOR = 1
    BRAKE = 2


_LUMP_J_K: Final = (BOX_J_K, 18.0, 8.0)
_LUMP_S: Final = (BOX_S, 90.0, 80.0)


class Warmth:
    """The temperatures of one module. ``above_ambient_K``: that of all of it at ``t_ns``."""

    __slots__ = ("_energy_J", "_t_ns", "lost_J")

    def __init__(self, above_ambient_K: float, t_ns: int) -> None:
        self._energy_J = [above_ambient_K * BOX_J_K, 0.0, 0.0]
        """Of the box above the hall, of motor and brake above the box."""
        self._t_ns = t_ns
        self.lost_J = 0.0
        """What went to the hall so far."""

    @property
    def stored_J(self) -> float:
        """What all lumps hold, at the last look."""
        return sum(self._energy_J)

    def heat(self, energy_J: float, t_ns: int, part: Part = Part.BOX) -> None:
        """Add heat to a part at ``t_ns``, after the cooling since the last call."""
        self._settle(t_ns)
        self._energy_J[part] += energy_J

    def temperature_C(self, t_ns: int) -> float:
        """Return the box's temperature at ``t_ns`` (not before the last heat)."""
        self._settle(t_ns)
        return AMBIENT_C + self._energy_J[Part.BOX] / BOX_J_K

    def part_C(self, part: Part, t_ns: int) -> float:
        """Return the temperature of a part at ``t_ns``."""
        box_C = self.temperature_C(t_ns)
        return box_C if part is Part.BOX else box_C + self._energy_J[part] / _LUMP_J_K[part]

    def hottest_C(self, t_ns: int) -> float:
        """Return the temperature of the hotter of motor and brake."""
        return max(self.part_C(Part.MOTOR, t_ns), self.part_C(Part.BRAKE, t_ns))

    def _settle(self, t_ns: int) -> None:
        """Let time pass. A lump's excess E decays with its time constant s, and feeds the box,
        which decays with its own, S: after t the box has of it
        E (e^(-t/S) - e^(-t/s)) / (1 - s/S). Exact, so that nobody's look changes anything."""
        duration_s = (t_ns - self._t_ns) * 1e-9
        if duration_s <= 0.0:
            return
        self._t_ns = t_ns
        energy_J, before_J = self._energy_J, self.stored_J
        slow = exp(-duration_s / BOX_S)
        box_J = energy_J[0] * slow
        for part in (Part.MOTOR, Part.BRAKE):
            if energy_J[part]:
                fast = exp(-duration_s / _LUMP_S[part])
                box_J += energy_J[part] * (slow - fast) / (1.0 - _LUMP_S[part] / BOX_S)
                energy_J[part] *= fast
        energy_J[0] = box_J
        self.lost_J += before_J - self.stored_J
