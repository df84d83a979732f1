"""What a pivot needs and does: thresholds, outcomes, and the torques that must move nothing.

Owns the equations of a flywheel-braked cube that turns about an edge: the exact threshold by
quadrature, the ideal one by conservation of angular momentum, infeasibility and its reason.
The course of a motion is tumble.py's. Pure functions; SI units, radians.
"""

import math
from dataclasses import dataclass, replace
from functools import lru_cache
from itertools import pairwise
from typing import Final

from sim_link import contact, kinds
from sim_link.errors import SimStateError
from sim_link.hold import GRAVITY_M_S2, Hold, floor_hold
from sim_link.kinds import Kind
from sim_link.motion import Moment, MotionResult, Watch
from sim_link.tumble import tumble

__all__ = [
    "GRAVITY_M_S2",
    "MotionResult",
    "Threshold",
    "floor_pivot",
    "floor_threshold",
    "hinge_threshold",
    "rest_torque_N_m",
    "tipping_torque_N_m",
]

SPIN_ARM_OF_SQUARE: Final = (math.sqrt(2) + math.log1p(math.sqrt(2))) / 6
"""Mean distance from a square's centre to its points, over its side: 0.3826."""

_GRID: Final = 400
_HALVINGS: Final = 60
_PANELS: Final = (0.0, 0.01, 0.03, 0.1, 0.3, 1.0)
"""Ends of the quadrature's panels: close together at the start, where a brake that barely
beats the hold leaves the body slowest."""
_OVER_LIMIT: Final = 10.0
_FREE_STRIDE: Final = 1.02
_HELD_STRIDE: Final = 1.5
_AGREES: Final = 1e-4
_SLIDING_START: Final = 0.2
"""Of the ideal speed, and well below: a corner without friction needs sqrt(5/8) of it
(uniform cube)."""


@dataclass(frozen=True, slots=True)
class Threshold:
    """What a motion needs. Speeds are of the wheel before braking; NaN where infeasible.

    ``w_ideal_rad_s`` is that of an instant brake, ``w_over_rad_s`` where a second face first
    follows (None: not below ten times ``w_min_rad_s``), ``torque_ratio`` k the brake torque
    over the hold torque at rest, ``lock_angle_rad`` and ``brake_s`` those at ``w_min_rad_s``.
    """

    feasible: bool
    reason: str
    w_min_rad_s: float
    w_ideal_rad_s: float
    w_over_rad_s: float | None
    torque_ratio: float
    lock_angle_rad: float
    brake_s: float


def hinge_threshold(
    hold: Hold, edge_inertia: float, wheel_inertia: float, brake: float
) -> Threshold:
    """Least wheel speed that carries a hinged body through ``hold.end_rad``. SI units.

    Ideal: angular momentum about the edge, w_ideal = sqrt(2 Ie dE) / Iw. Finite brake: while
    the wheel slips, Ib theta'' = tau - T by the work-energy theorem gives theta'^2 =
    2 (tau theta - V) / Ib; it must lock at the first angle where (Ie/Ib)(tau theta - V) =
    dE - V, which fixes the speed before. Infeasible where tau theta - V reaches zero first.
    ``w_over_rad_s`` is left None.
    """
    body_inertia = edge_inertia - wheel_inertia
    needed = hold.energy_J(hold.end_rad)
    ideal = math.sqrt(2 * edge_inertia * needed) / wheel_inertia
    ratio = brake / hold.torque_N_m(0.0) if hold.torque_N_m(0.0) > 0 else math.inf
    if ratio <= 1.0:
        reason = f"the brake does not lift the body: torque is {ratio:.3f} of the hold torque"
        return _infeasible(reason, ideal, ratio)
    lock = _lock_angle(hold, edge_inertia / body_inertia, brake)
    if lock is None:
        reason = "the brake lifts the body but stalls on the way, at any speed"
        return _infeasible(reason, ideal, ratio)
    rate = math.sqrt(2 * (brake * lock - hold.energy_J(lock)) / body_inertia)
    brake_s = _slipping_s(hold, body_inertia, brake, lock)
    w_min = rate + brake / wheel_inertia * brake_s
    return Threshold(True, "", w_min, ideal, None, ratio, lock, brake_s)


def _infeasible(reason: str, ideal: float, ratio: float) -> Threshold:
    return Threshold(False, reason, math.nan, ideal, None, ratio, math.nan, math.nan)


def _lock_angle(hold: Hold, inertia_ratio: float, brake: float) -> float | None:
    """First angle at which locking leaves exactly the energy still needed; None: it stalls."""
    needed = hold.energy_J(hold.end_rad)

    def surplus(angle: float) -> float:
        lift = hold.energy_J(angle)
        return inertia_ratio * (brake * angle - lift) - (needed - lift)

    low = 0.0
    for i in range(1, _GRID + 1):
        high = hold.end_rad * i / _GRID
        if surplus(high) >= 0.0:
            break
        if brake * high <= hold.energy_J(high):
            return None
        low = high
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        low, high = (low, middle) if surplus(middle) >= 0.0 else (middle, high)
    return high


def _slipping_s(hold: Hold, body_inertia: float, brake: float, angle: float) -> float:
    """Time to reach an angle with the wheel slipping: integral of dtheta/theta'.

    theta = y^2 takes the square-root singularity at the start away; Gauss-Legendre then.
    """
    import numpy as np  # costs 0.1 s: not at start

    nodes, weights = np.polynomial.legendre.leggauss(24)
    total = 0.0
    for low, high in pairwise(_PANELS):
        half = math.sqrt(angle) * (high - low) / 2
        middle = math.sqrt(angle) * (high + low) / 2
        for node, weight in zip(nodes.tolist(), weights.tolist(), strict=True):
            y = middle + half * node
            theta = y * y
            rate = math.sqrt(2 * (brake * theta - hold.energy_J(theta)) / body_inertia)
            total += weight * half * 2 * y / rate
    return total


@lru_cache(maxsize=64)
def floor_threshold(kind: Kind, face_up: int = 1, sense: int = 1) -> Threshold:
    """Least wheel speed of a floor pivot, and where `over` begins.

    Exact for a hinge that holds. A kind that is not held is followed at that speed: where its
    corner slides enough to shift the threshold by 1e-4, it is searched for with floor_pivot.
    ``brake_s`` includes the brake's onset. Raises SimStateError for a posture without pivots.
    """
    _check_posture(face_up, sense, 4)
    hinged = hinge_threshold(
        floor_hold(kind, face_up, sense),
        kinds.edge_inertia_kg_m2(kind, face_up, sense),
        kind.wheel_inertia_kg_m2,
        kind.brake_torque_N_m,
    )
    if not hinged.feasible:
        return hinged
    found = replace(hinged, brake_s=hinged.brake_s + kind.brake_onset_s)
    if not kind.held and not _is_threshold(kind, found.w_min_rad_s, face_up, sense):
        found = _sliding_threshold(kind, found, face_up, sense)
    if not found.feasible:
        return found
    over = _least_speed(kind, 2, (found.w_min_rad_s, _OVER_LIMIT), face_up, sense)
    return replace(found, w_over_rad_s=over)


def _is_threshold(kind: Kind, speed: float, face_up: int, sense: int) -> bool:
    below = floor_pivot(kind, speed * (1 - _AGREES), face_up, sense).faces
    above = floor_pivot(kind, speed * (1 + _AGREES), face_up, sense).faces
    return below < 1 <= above


def _sliding_threshold(kind: Kind, hinged: Threshold, face_up: int, sense: int) -> Threshold:
    """Threshold of a corner that slides: a search, since no closed energy balance holds."""
    start = _SLIDING_START * hinged.w_ideal_rad_s
    w_min = _least_speed(kind, 1, (start, _OVER_LIMIT), face_up, sense)
    if w_min is None:
        reason = "the corner slides away under the brake, at any speed tried"
        return _infeasible(reason, hinged.w_ideal_rad_s, hinged.torque_ratio)
    locked: list[Moment] = []

    def watch(moment: Moment) -> None:
        if not locked and not moment.slipping:
            locked.append(moment)

    tumble(contact.body_of(kind, face_up, sense), kind.brake_onset_s, w_min, watch)
    return replace(
        hinged, w_min_rad_s=w_min, lock_angle_rad=locked[0].angle_rad, brake_s=locked[0].t_s
    )


def _least_speed(
    kind: Kind, faces: int, span: tuple[float, float], face_up: int, sense: int
) -> float | None:
    """Lowest speed that turns so many faces, to 1e-6; None if none from ``span[0]`` up to
    ``span[1]`` times it.

    Searched upwards, since without a held hinge the number of faces is not monotone in the
    speed; a held one is monotone, and the strides may be long.
    """

    def enough(speed: float) -> bool:
        return floor_pivot(kind, speed, face_up, sense).faces >= faces

    stride = _HELD_STRIDE if kind.held else _FREE_STRIDE
    low = high = span[0]
    while not enough(high):
        low, high = high, high * stride
        if high > span[0] * span[1]:
            return None
    while high - low > 1e-6 * high:
        middle = (low + high) / 2
        low, high = (low, middle) if enough(middle) else (middle, high)
    return high


def floor_pivot(
    kind: Kind,
    wheel_rad_s: float,
    face_up: int = 1,
    sense: int = 1,
    watch: Watch | None = None,
) -> MotionResult:
    """What braking at this wheel speed does to a module on the floor.

    ``wheel_rad_s`` is the speed in the ordered sense, at least zero; angles and faces of the
    result are positive in it. ``watch`` is shown every moment computed. Raises SimStateError for
    a speed or posture that cannot be.
    """
    _check_posture(face_up, sense, 4)
    if not 0.0 <= wheel_rad_s < math.inf:
        raise SimStateError(f"wheel speed {wheel_rad_s} rad/s: zero or more is needed")
    return tumble(contact.body_of(kind, face_up, sense), kind.brake_onset_s, wheel_rad_s, watch)


def tipping_torque_N_m(kind: Kind, face_up: int, sense: int) -> float:
    """Smallest torque on the body about the wheel axis that moves the resting body.

    Faces 1 to 4: m g times the lever of the edge it would tip about, the offset turned with
    the body, plus the magnets' T0 if held. Faces 5 and 6, axis upright: friction against yaw,
    mu m g a 0.3826: under uniform pressure each point resists with mu p at its distance
    from the centre, whose mean over a square is 0.3826 a (from a corner it is twice that).
    Magnets and an uneven pressure are left out there.
    """
    _check_posture(face_up, sense, 6)
    if face_up <= 4:
        return floor_hold(kind, face_up, sense).torque_N_m(0.0)
    weight = kind.mass_kg * GRAVITY_M_S2
    return kind.floor_friction * weight * kind.side_m * SPIN_ARM_OF_SQUARE


def rest_torque_N_m(kind: Kind, face_up: int, sense: int) -> float:
    """Torque with which the motor may slow the wheel: half the tipping torque, at most the
    motor's own. ``sense`` is the wheel's: slowing it pushes the body that way."""
    return min(tipping_torque_N_m(kind, face_up, sense) / 2, kind.spin_up_torque_N_m)


def _check_posture(face_up: int, sense: int, faces: int) -> None:
    if not 1 <= face_up <= faces or sense not in (1, -1):
        raise SimStateError(f"no motion from face {face_up} in sense {sense}")
