"""What a pivot or a hop needs and does, for one kind: thresholds, outcomes, infeasibility.

Owns the choice of method: the exact threshold where a hinge holds under a steady brake, and a
search along the motion itself where a corner slides, a body flies, a brake fades or a second face
follows. SI units, radians.
"""

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Final

import numpy as np

from protocol.codes import Setting
from sim_link import kinds
from sim_link.errors import SimStateError
from sim_link.kinds import Kind
from sim_link.mechanics import threshold
from sim_link.mechanics.bodies import Attempt
from sim_link.mechanics.hold import hold_of
from sim_link.mechanics.state import MotionResult, Watch
from sim_link.mechanics.tumble import tumble

FACES_NEEDED: Final = {Setting.FLOOR: 1, Setting.WALL: 1, Setting.CREST: 2, Setting.FLAT: 1}
"""Quarter turns that a pivot makes."""
NOTHING_HOLDS: Final = "nothing holds the edge: a kind that is not held pivots on the floor only"
SLIDES_AWAY: Final = "the corner slides away under the brake, at any speed tried"
FADES: Final = "the brake fades before the body is over, at any speed tried"
STAYS_DOWN: Final = "the module does not leave the floor, at any speed tried"
HELD_DOWN: Final = "the magnets hold the edge: a kind that is held does not hop"

_OVER_LIMIT: Final = 10.0
_FREE_STRIDE: Final = 1.02
_HELD_STRIDE: Final = 1.5
_AGREES: Final = 1e-4
_SLIDING_START: Final = 0.2
"""Of the ideal speed, and well below: a corner without friction needs sqrt(5/8) of it
(uniform cube)."""
_PRECISION: Final = 1e-6


@dataclass(frozen=True, slots=True)
class Threshold:
    """What a motion needs. Speeds are of the wheel before braking; NaN where infeasible.

    ``w_ideal_rad_s`` is that of an instant brake, ``w_over_rad_s`` where a further face first
    follows (None: not below ten times ``w_min_rad_s``), ``lift_off_rad_s`` where the body first
    leaves the floor (None: not below twice the ideal), ``torque_ratio`` k the brake torque over the
    hold torque at rest, ``torque_margin`` the brake torque over the least that could do it,
    ``lock_angle_rad`` and ``brake_s`` those at ``w_min_rad_s``.
    """

    feasible: bool
    reason: str
    w_min_rad_s: float
    w_ideal_rad_s: float
    w_over_rad_s: float | None
    lift_off_rad_s: float | None
    torque_ratio: float
    torque_margin: float
    lock_angle_rad: float
    brake_s: float


def pivot(
    kind: Kind,
    wheel_rad_s: float,
    face_up: int = 1,
    sense: int = 1,
    *,
    setting: Setting = Setting.FLOOR,
    watch: Watch | None = None,
) -> MotionResult:
    """What braking at this wheel speed does to a module; on the floor, a hop is the same deed.

    ``wheel_rad_s`` is the speed in the ordered sense, at least zero; angles and faces of the
    result are positive in it. ``watch`` is shown every moment computed. Raises SimStateError for
    a speed or posture that cannot be.
    """
    check_posture(face_up, sense, 4)
    if not 0.0 <= wheel_rad_s < math.inf:
        raise SimStateError(f"wheel speed {wheel_rad_s} rad/s: zero or more is needed")
    return tumble([Attempt(kind, wheel_rad_s, face_up, sense, setting)], watch)[0]


def check_posture(face_up: int, sense: int, faces: int) -> None:
    """Raise SimStateError where there is no motion from this face, or in this sense."""
    if not 1 <= face_up <= faces or sense not in (1, -1):
        raise SimStateError(f"no motion from face {face_up} in sense {sense}")


@lru_cache(maxsize=128)
def pivot_threshold(
    kind: Kind, face_up: int = 1, sense: int = 1, setting: Setting = Setting.FLOOR
) -> Threshold:
    """Least wheel speed of a pivot, where `over` begins, and where the body leaves the floor.

    Exact for a hinge that holds under a steady brake. A kind that is not held is followed at that
    speed: where its corner slides enough to shift the threshold by 1e-4, it is searched for, and so
    it is for a brake that fades. ``brake_s`` includes the brake's onset. Raises SimStateError for
    a posture without pivots.
    """
    check_posture(face_up, sense, 4)
    found = _hinged(kind, setting, face_up, sense)
    if not found.feasible or found.w_min_rad_s == 0.0:
        return found  # ten times nothing is nothing: no speed to look for beyond it
    course = _Course(kind, setting, face_up, sense)
    if kind.brake_kept < 1.0 or not (kind.held or course.turns_at(found.w_min_rad_s)):
        found = _followed(course, found)
    if not found.feasible:
        return found
    return replace(
        found,
        w_over_rad_s=course.least(found.w_min_rad_s, course.too_far),
        lift_off_rad_s=None if kind.held else course.least(course.start_rad_s, _lifts),
    )


@lru_cache(maxsize=128)
def hop_threshold(kind: Kind, face_up: int = 1, sense: int = 1) -> Threshold:
    """Least wheel speed that throws a module off the floor. ``w_over_rad_s`` is left None."""
    check_posture(face_up, sense, 4)
    found = _hinged(kind, Setting.FLOOR, face_up, sense)
    if kind.held:
        return _impossible(found, HELD_DOWN)
    if found.torque_ratio <= 1.0:
        return found
    course = _Course(kind, Setting.FLOOR, face_up, sense)
    speed = course.least(course.start_rad_s, _lifts)
    if speed is None:
        return _impossible(found, STAYS_DOWN)
    motion = pivot(kind, speed, face_up, sense)
    return replace(
        found,
        feasible=True,
        reason="",
        w_min_rad_s=speed,
        lift_off_rad_s=speed,
        lock_angle_rad=motion.lock_rad,
        brake_s=motion.brake_s,
    )


def _hinged(kind: Kind, setting: Setting, face_up: int, sense: int) -> Threshold:
    """The threshold of a hinge that holds, or why there is none."""
    hold = hold_of(kind, face_up, sense, setting)
    edge = np.asarray(kinds.edge_inertia_kg_m2(kind, *_hinge_posture(setting, face_up, sense)))
    wheel = np.asarray(kind.wheel_inertia_kg_m2)
    found = threshold.hinge_thresholds(hold, edge, wheel, np.asarray(kind.brake_torque_N_m))
    made = Threshold(
        feasible=not math.isnan(float(found.w_min_rad_s)),
        reason="",
        w_min_rad_s=float(found.w_min_rad_s),
        w_ideal_rad_s=float(found.w_ideal_rad_s),
        w_over_rad_s=None,
        lift_off_rad_s=None,
        torque_ratio=float(found.ratio),
        torque_margin=float(found.margin),
        lock_angle_rad=float(found.lock_rad),
        brake_s=float(found.brake_s) + kind.brake_onset_s,
    )
    if setting is not Setting.FLOOR and not kind.held:
        return _impossible(made, NOTHING_HOLDS)
    if made.feasible:
        return made
    no_lift = made.torque_ratio <= 1.0
    reason = threshold.NO_LIFT if no_lift else threshold.STALLS
    return _impossible(made, reason.format(ratio=made.torque_ratio, margin=made.torque_margin))


def _hinge_posture(setting: Setting, face_up: int, sense: int) -> tuple[int, int]:
    """The posture whose lower edge is the one turned about: a wall's is the upper one."""
    if setting in (Setting.WALL, Setting.CREST):
        return (face_up - 1 + sense) % 4 + 1, sense
    return face_up, sense


def _impossible(found: Threshold, reason: str) -> Threshold:
    nothing = dict.fromkeys(("w_min_rad_s", "lock_angle_rad", "brake_s"), math.nan)
    return replace(found, feasible=False, reason=reason, **nothing)


def _followed(course: "_Course", hinged: Threshold) -> Threshold:
    """Threshold where no closed energy balance holds: a search along the motion."""
    speed = course.least(course.start_rad_s, course.turns)
    if speed is None:
        return _impossible(hinged, SLIDES_AWAY if course.kind.brake_kept >= 1.0 else FADES)
    motion = course.at(speed)
    return replace(
        hinged, w_min_rad_s=speed, lock_angle_rad=motion.lock_rad, brake_s=motion.brake_s
    )


def _lifts(motion: MotionResult) -> bool:
    return motion.lift_rad_s > 0.0


class _Course:
    """One kind in one setting and posture, tried at many speeds."""

    def __init__(self, kind: Kind, setting: Setting, face_up: int, sense: int) -> None:
        self.kind = kind
        self._tried = (face_up, sense, setting)
        self._needed = FACES_NEEDED[setting]
        self._ladder: list[MotionResult] = []
        self._ideal_rad_s = _hinged(kind, setting, face_up, sense).w_ideal_rad_s

    @property
    def start_rad_s(self) -> float:
        """A speed from which on to search for the least."""
        return _SLIDING_START * self._ideal_rad_s

    def turns(self, motion: MotionResult) -> bool:
        """Whether the body got as far as was asked for."""
        return motion.faces >= self._needed

    def too_far(self, motion: MotionResult) -> bool:
        """Whether it went on from there."""
        return motion.faces > self._needed

    def turns_at(self, speed: float) -> bool:
        """Whether the motion's own threshold is there, to 1e-4."""
        return self.turns(self.at(speed * (1.0 + _AGREES))) and not self.turns(
            self.at(speed * (1.0 - _AGREES))
        )

    def at(self, speed: float) -> MotionResult:
        """What comes of this speed."""
        return tumble([Attempt(self.kind, speed, *self._tried)])[0]

    def least(self, start: float, reached: Callable[[MotionResult], bool]) -> float | None:
        """Lowest speed from ``start`` on that gets there, to 1e-6; None if none up to ten times it,
        or ten times the ideal speed.

        Looked for upwards, since without a held hinge the number of faces is not monotone in the
        speed, then by halving between the last speed that does not get there and the first one that
        does.
        """
        low, high = start, None
        for speed, motion in self._tries(start):
            if reached(motion):
                high = speed
                break
            low = speed
        if high is None or reached(self.at(low)):
            return high
        while high - low > _PRECISION * high:
            middle = (low + high) / 2
            low, high = (low, middle) if reached(self.at(middle)) else (middle, high)
        return high

    def _tries(self, start: float) -> Iterator[tuple[float, MotionResult]]:
        """Motions at rising speeds, up to ten times the first or the ideal one. A held body's
        faces are monotone in the speed, so the strides may be long. A free one's are short, all on
        one ladder, and kept: one by one, since what is looked for mostly comes early and the
        fastest take longest."""
        last = _OVER_LIMIT * max(start, self._ideal_rad_s)
        if self.kind.held:
            speed = start
            while speed <= last:
                yield speed, self.at(speed)
                speed *= _HELD_STRIDE
            return
        rung, speed = 0, self.start_rad_s
        while speed <= last:
            if rung == len(self._ladder):
                self._ladder.append(self.at(speed))
            if speed > start:
                yield speed, self._ladder[rung]
            rung, speed = rung + 1, speed * _FREE_STRIDE
