"""One corner of a rigid square on a rough floor: accelerations, ground force, landing.

Owns the planar Newton-Euler equations of the body on one corner, sticking or sliding (Coulomb
friction), and the impulse of a landing. Knows no sequence of events (tumble.py).

Plane of the motion: x forward, z up; angles and rates forward (clockwise seen with x to the
right), counted from the face the body started on. Corner n is the one about which the body
turns from its nth face on to the next. An arm leads from a corner to the centre of mass.
"""

import math
from dataclasses import dataclass
from typing import Final, NamedTuple

from sim_link.hold import GRAVITY_M_S2, holding_magnet_N_m
from sim_link.kinds import Kind, centre_inertia_kg_m2, offset_m

QUARTER: Final = math.pi / 2
_CORNER_SIGNS: Final = ((1, -1), (1, 1), (-1, 1), (-1, -1))


@dataclass(frozen=True, slots=True)
class Body:
    """What of a kind the motion needs, the ordered sense made forward."""

    side_m: float
    mass_kg: float
    inertia_kg_m2: float
    """Ic, wheel locked, about the centre of mass."""
    wheel_inertia_kg_m2: float
    brake_torque_N_m: float
    corners_m: tuple[tuple[float, float], ...]
    """From the centre of mass to corners 0 to 3 at angle zero."""
    held: bool
    magnet_torque_N_m: float
    magnet_angle_rad: float
    friction: float
    restitution: float


class Push(NamedTuple):
    """What the wheel does to the body: a brake torque and the inertia that turns under it.

    Slipping: the brake torque, and the body without its wheel. Locked: none, and the whole.
    """

    torque_N_m: float
    inertia_kg_m2: float


class Footing(NamedTuple):
    """How the body stands: on which corner, off which face (the one it last lay on: the
    corner's own or the next), under what push, sticking (``way`` 0) or sliding (1 forward,
    -1 back)."""

    corner: int
    face: int
    drive: Push
    way: int = 0


class Pull(NamedTuple):
    """Accelerations of a body on a corner, and the ground's force on that corner."""

    angular_rad_s2: float
    slide_m_s2: float
    normal_N: float
    friction_N: float


def body_of(kind: Kind, face_up: int = 1, sense: int = 1) -> Body:
    """Set a kind up for a motion from the face that is up, in the ordered sense."""
    away, up = offset_m(kind, face_up, sense)
    half = kind.side_m / 2
    return Body(
        side_m=kind.side_m,
        mass_kg=kind.mass_kg,
        inertia_kg_m2=centre_inertia_kg_m2(kind),
        wheel_inertia_kg_m2=kind.wheel_inertia_kg_m2,
        brake_torque_N_m=kind.brake_torque_N_m,
        corners_m=tuple((away + i * half, -up + k * half) for i, k in _CORNER_SIGNS),
        held=kind.held,
        magnet_torque_N_m=holding_magnet_N_m(kind),
        magnet_angle_rad=kind.magnet_angle_rad,
        friction=kind.floor_friction,
        restitution=kind.restitution,
    )


def push(body: Body, slipping: bool) -> Push:
    """The brake's torque and the inertia about the centre of mass, slipping or locked."""
    if slipping:
        return Push(body.brake_torque_N_m, body.inertia_kg_m2 - body.wheel_inertia_kg_m2)
    return Push(0.0, body.inertia_kg_m2)


def arm_m(body: Body, corner: int, angle_rad: float) -> tuple[float, float]:
    """From a corner to the centre of mass, (forward, up), at this angle of the body."""
    x, z = body.corners_m[corner % 4]
    cosine, sine = math.cos(angle_rad), math.sin(angle_rad)
    return -(x * cosine + z * sine), x * sine - z * cosine


def lowest_corner(angle_rad: float) -> int:
    """Number of the corner nearest the floor at this angle."""
    return math.floor(angle_rad / QUARTER)


def magnet_N_m(body: Body, footing: Footing, angle_rad: float) -> float:
    """Magnets' hold T0 e^(-tilt/theta0) back to the face last lain on, against forward.

    The pull of the face ahead is left out, as in the hold curve: it acts only within theta0
    of the landing and adds at most T0 theta0 to the energy, most of which the landing takes.
    """
    if body.magnet_torque_N_m == 0.0:
        return 0.0
    tilt = abs(angle_rad - footing.face * QUARTER)
    hold = body.magnet_torque_N_m * math.exp(-tilt / body.magnet_angle_rad)
    return hold if footing.face == footing.corner else -hold


def stick(body: Body, footing: Footing, angle_rad: float, rate_rad_s: float) -> Pull:
    """The corner stays where it is: a hinge. Ground force by Newton's second law.

    (I + m r^2) theta'' = tau + m g rx - T_magnets;  N = m (g - rx theta'' - rz theta'^2);
    F = m (rz theta'' - rx theta'^2). With the wheel locked N = 0 is the lift-off condition
    theta'^2 = g (1 - (m r^2/Ie) cos^2 phi) / (r sin phi).
    """
    torque, inertia = footing.drive
    rx, rz = arm_m(body, footing.corner, angle_rad)
    mass = body.mass_kg
    moment = torque + mass * GRAVITY_M_S2 * rx - magnet_N_m(body, footing, angle_rad)
    angular = moment / (inertia + mass * (rx * rx + rz * rz))
    squared = rate_rad_s * rate_rad_s
    normal = mass * (GRAVITY_M_S2 - rx * angular - rz * squared)
    return Pull(angular, 0.0, normal, mass * (rz * angular - rx * squared))


def slide(body: Body, footing: Footing, angle_rad: float, rate_rad_s: float) -> Pull:
    """The corner slides under Coulomb friction F = -way mu N. Nothing holds a free body.

    I theta'' = tau + rx N - rz F with N = m (g - rx theta'' - rz theta'^2), solved for
    theta''. Where I + m rx (rx + way mu rz) is not positive (Painleve's paradox, mu above
    about 1.15 for a uniform cube) rigid sliding has no answer; the corner then jams and is
    taken to stick.
    """
    corner, _, (torque, inertia), way = footing
    rx, rz = arm_m(body, corner, angle_rad)
    mass = body.mass_kg
    lever = rx + way * body.friction * rz
    resisting = inertia + mass * rx * lever
    if resisting <= 0.0:
        return stick(body, footing, angle_rad, rate_rad_s)
    squared = rate_rad_s * rate_rad_s
    angular = (torque + mass * (GRAVITY_M_S2 - rz * squared) * lever) / resisting
    normal = mass * (GRAVITY_M_S2 - rx * angular - rz * squared)
    friction = -way * body.friction * normal
    return Pull(angular, friction / mass - (rz * angular - rx * squared), normal, friction)


def momentum_about(
    body: Body,
    arm: tuple[float, float],
    inertia_kg_m2: float,
    rate_rad_s: float,
    velocity_m_s: tuple[float, float],
) -> float:
    """Angular momentum about the corner at the foot of an arm: I w + m (rz vx - rx vz)."""
    (rx, rz), (vx, vz) = arm, velocity_m_s
    return inertia_kg_m2 * rate_rad_s + body.mass_kg * (rz * vx - rx * vz)


def landing_rate_rad_s(
    body: Body,
    arm: tuple[float, float],
    inertia_kg_m2: float,
    momentum: float,
    rebound_m_s: tuple[float, float] = (0.0, 0.0),
) -> float:
    """Body rate after a corner strikes the floor.

    Angular momentum about that corner survives, since the impulse passes through it.
    ``rebound_m_s`` is the corner's velocity after; none where it sticks (plastic: a uniform
    cube that comes down flat, wheel locked, keeps Ic/Ie = 1/4 of its rate). With restitution e
    the corner's whole velocity returns times -e, so that the energy lost is 1 - e^2 of what a
    plastic landing loses; returning the upward part alone can make energy out of nothing
    where the centre of mass is not above the corner.
    """
    about_corner = inertia_kg_m2 + body.mass_kg * (arm[0] ** 2 + arm[1] ** 2)
    return (momentum - momentum_about(body, arm, 0.0, 0.0, rebound_m_s)) / about_corner
