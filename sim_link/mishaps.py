"""What is made to go wrong with a running module, for practice and for tests.

Owns which fault kind of options.py strikes at which turn, and that those which restart a module do
so once. What is wrong with the body or the cell from the start is posture.py's and drive.py's.
Decides no consequences: module and works ask, and act.
"""

from typing import Final, NamedTuple

from protocol.codes import Activity, Fault
from sim_link.box import Box
from sim_link.options import FaultKind

BROWN_OUT_mV: Final = 2_700
"""Voltage at which the supply's supervisor lets the controller start anew."""


class Restart(NamedTuple):
    """Why a controller starts anew, with the figure of that fault."""

    fault: Fault
    detail: int


class Mishaps:
    """What is still to go wrong with one module."""

    def __init__(self, box: Box) -> None:
        self._box = box
        self._to_come = set(box.spec.faults)

    @property
    def silent(self) -> bool:
        """Whether nothing that it sends gets out, once it has introduced itself."""
        return FaultKind.SILENT in self._to_come

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

    def noticed(self, activity: Activity) -> Fault | None:
        """The fault that the firmware notices as an activity begins, and that stands from then
        on; None where there is none, or it stands already."""
        if activity is Activity.BRAKING and self._strikes(FaultKind.LOST_GYRO):
            return Fault.SENSOR_LOST
        motion = self._box.drive.motion
        if activity is Activity.RESTING and motion is not None and motion.stalled:
            return None if Fault.WHEEL_STUCK in self._box.faults else Fault.WHEEL_STUCK
        return None

    def _strikes(self, kind: FaultKind) -> bool:
        """Whether this is to come; then it has come."""
        found = kind in self._to_come
        self._to_come.discard(kind)
        return found
