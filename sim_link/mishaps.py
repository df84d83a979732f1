"""What is made to go wrong with a running module, for practice and for tests.

Owns which fault kind of fault_kinds.py strikes at which turn, that those which restart a module
do so once, and how each begins and ends while the module runs. When it does is schedule.py's. What
is wrong with body and cell from the start is read by posture.py and drive.py themselves.
Decides no consequences: module and works ask, and act.
"""

from collections.abc import Callable, Mapping
from functools import partial
from typing import Final, NamedTuple

from protocol.codes import Activity, Fault
from sim_link.box import Box
from sim_link.heat import COOL_C, HOT_C
from sim_link.options import FaultKind
from sim_link.wear import WEARING, Wearing

BROWN_OUT_mV: Final = 2_700
"""Voltage at which the supply's supervisor lets the controller start anew."""

_AT_REST: Final = frozenset({Activity.STILL, Activity.FLASHING})
_POWER_LOST: Final = frozenset({FaultKind.RESTART, FaultKind.SWAPPED_CELL})
_NOTICED_AS: Final[Mapping[FaultKind, Fault]] = {
    FaultKind.LOST_GYRO: Fault.SENSOR_LOST,
    FaultKind.STUCK_WHEEL: Fault.WHEEL_STUCK,
}
"""What the firmware calls a fault that stands once it has noticed it."""


class Restart(NamedTuple):
    """Why a controller starts anew, with the figure of that fault."""

    fault: Fault
    detail: int


class Mishaps:
    """What is still to go wrong with one module, and what is wrong with it now."""

    def __init__(self, box: Box) -> None:
        self._box = box
        self._to_come = set(box.spec.faults)
        self._jam: bool | None = None
        """A wheel that turns gets stuck, or comes free, once it is at rest."""

    @property
    def silent(self) -> bool:
        """Whether nothing that it sends gets out, once it has introduced itself."""
        return FaultKind.SILENT in self._to_come

    # -- asked for while it runs -----------------------------------------------------------

    def begin(self, kind: FaultKind, t_ns: int) -> bool:
        """Let a fault begin; return whether the controller loses its power by it.

        What strikes at a turn (a brake, a wheel at speed) waits for the next one.
        """
        self._to_come.add(kind)
        if kind in _STATES:
            _STATES[kind](self, True, t_ns)
        return kind in _POWER_LOST

    def end(self, kind: FaultKind, t_ns: int) -> Fault | None:
        """Let a fault end, or not come any more; return what then no longer stands."""
        self._to_come.discard(kind)
        if kind in _STATES:
            _STATES[kind](self, False, t_ns)
        waits = kind is FaultKind.STUCK_WHEEL and self._jam is not None
        return None if waits else self._over(kind)

    def at_rest(self, activity: Activity) -> Fault | None:
        """Do what waited for the wheel's rest, if this is it; return what no longer stands."""
        if activity not in _AT_REST or self._jam is None:
            return None
        self._box.drive.stuck, self._jam = self._jam, None
        return None if self._box.drive.stuck else self._over(FaultKind.STUCK_WHEEL)

    def _over(self, kind: FaultKind) -> Fault | None:
        fault = _NOTICED_AS.get(kind)
        return fault if fault is not None and self._box.faults.fall(fault) else None

    def _jammed(self, begins: bool, t_ns: int) -> None:
        self._jam = begins
        if self._box.drive.activity in _AT_REST:
            self._box.drive.stuck, self._jam = begins, None

    def _weakened(self, begins: bool, t_ns: int) -> None:
        self._box.drive.body.weaken(begins)

    def _lifted(self, begins: bool, t_ns: int) -> None:
        self._box.drive.body.lift(begins, t_ns)

    def _emptied(self, begins: bool, t_ns: int) -> None:
        self._box.drive.set_charge(None if begins else self._box.spec.charge, t_ns)

    def _swapped(self, begins: bool, t_ns: int) -> None:
        self._box.drive.swap_cell(t_ns)

    def _charged(self, begins: bool, t_ns: int) -> None:
        if begins:
            self._box.drive.start_charging(t_ns)
        else:
            self._box.drive.stop_charging(t_ns)

    def _worn(self, begins: bool, t_ns: int, *, part: Wearing) -> None:
        self._box.drive.wear_out(part, begins, t_ns)

    # -- at their turns --------------------------------------------------------------------

    def before_step(self) -> Restart | None:
        """A bad contact gives way as the wheel comes to speed, where the load is greatest."""
        turning = self._box.drive.activity is Activity.SPINNING_UP
        if turning and not self._box.drive.stuck and self._strikes(FaultKind.BROWN_OUT):
            return Restart(Fault.BROWN_OUT, BROWN_OUT_mV)
        return None

    def after_step(self, activity: Activity) -> Restart | None:
        """The controller hangs in the jolt of the brake, until its watchdog bites."""
        if activity is Activity.BRAKING and self._strikes(FaultKind.RESTART_ON_BRAKE):
            return Restart(Fault.WATCHDOG, 0)
        return None

    def noticed(self, activity: Activity, t_ns: int) -> Fault | None:
        """The fault that the firmware notices as an activity begins, and that stands from then
        on; None where there is none, or it stands already."""
        if activity is Activity.BRAKING and self._strikes(FaultKind.LOST_GYRO):
            return Fault.SENSOR_LOST
        if activity is Activity.STILL and self._too_hot(t_ns):
            return Fault.OVERHEATED
        motion = self._box.drive.motion
        if activity is Activity.RESTING and motion is not None and motion.stalled:
            return None if Fault.WHEEL_STUCK in self._box.faults else Fault.WHEEL_STUCK
        return None

    def _too_hot(self, t_ns: int) -> bool:
        hot = self._box.drive.supply.warmth.hottest_C(t_ns) > HOT_C
        return hot and Fault.OVERHEATED not in self._box.faults

    def cooled(self, t_ns: int) -> Fault | None:
        """Look whether what was too hot is cool again; return what then no longer stands."""
        if Fault.OVERHEATED not in self._box.faults:
            return None
        if self._box.drive.supply.warmth.hottest_C(t_ns) > COOL_C:
            return None
        self._box.faults.fall(Fault.OVERHEATED)
        return Fault.OVERHEATED

    def _strikes(self, kind: FaultKind) -> bool:
        """Whether this is to come; then it has come."""
        found = kind in self._to_come
        self._to_come.discard(kind)
        return found


_STATES: Final[Mapping[FaultKind, Callable[[Mishaps, bool, int], None]]] = {
    FaultKind.STUCK_WHEEL: Mishaps._jammed,
    FaultKind.WEAK_BRAKE: Mishaps._weakened,
    FaultKind.LIFTED: Mishaps._lifted,
    FaultKind.LOW_BATTERY: Mishaps._emptied,
    FaultKind.SWAPPED_CELL: Mishaps._swapped,
    FaultKind.CHARGING: Mishaps._charged,
    **{kind: partial(Mishaps._worn, part=part) for kind, part in WEARING.items()},
}
"""What is a state of body, wheel or cell, and switched there: True as it begins."""
