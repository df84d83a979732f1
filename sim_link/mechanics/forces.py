"""Forces on a rigid square at one of its corners: accelerations, ground force, landing impulse.

Owns the planar Newton-Euler equations of bodies on a corner, sticking or sliding (Coulomb
friction), and the impulse of a landing. Knows no sequence of events (tumble.py). Elementwise.
"""

from typing import NamedTuple, cast

from sim_link.mechanics.arrays import Bools, Floats, Ints
from sim_link.mechanics.bodies import QUARTER, Bodies, turned


class Footing(NamedTuple):
    """How bodies stand, for one step: their arms at angle zero, the face each last lay on and
    whether its arc began there, the inertia about the centre of mass that turns with the body
    (without the wheel while that slips), the way a corner slides (0: it sticks) and the way a
    face rubs (0 where none does)."""

    arm: tuple[Floats, Floats]
    face_rad: Floats
    from_low: Bools
    inertia_kg_m2: Floats
    way: Ints
    rub: Ints
    radius2_m2: Floats
    """Square of the arm's length."""
    magnets: bool
    slides: bool
    """Whether there are any; the costly terms are left out where there are none."""

    def take(self, places: Ints) -> "Footing":
        """Some of them, by place."""
        return Footing(
            (self.arm[0][places], self.arm[1][places]),
            self.face_rad[places],
            self.from_low[places],
            self.inertia_kg_m2[places],
            self.way[places],
            self.rub[places],
            self.radius2_m2[places],
            self.magnets,
            self.slides,
        )


class Pull(NamedTuple):
    """Accelerations of bodies on a corner, and the ground's force on that corner."""

    angular_rad_s2: Floats
    slide_m_s2: Floats
    normal_N: Floats
    friction_N: Floats


def footing(
    bodies: Bodies,
    arm: tuple[Floats, Floats],
    lies: tuple[Ints, Bools],
    inertia_kg_m2: Floats,
    ways: tuple[Ints, Ints],
) -> Footing:
    """Put together what stays the same through a step. ``lies``: the face last lain on, and
    whether the arc began there; ``ways``: in which the corner slides and the face rubs."""
    (face, from_low), (way, rub) = lies, ways
    some = bodies.ops.some
    radius2 = arm[0] * arm[0] + arm[1] * arm[1]
    magnets, slides = some(bodies.magnet_torque_N_m), some(way)
    face_rad = cast(Floats, face * QUARTER)
    return Footing(arm, face_rad, from_low, inertia_kg_m2, way, rub, radius2, magnets, slides)


def hold_N_m(bodies: Bodies, footing: Footing, angle_rad: Floats) -> Floats:
    """Magnets' hold T0 e^(-tilt/theta0) back to the face last lain on, and the face's drag.
    Positive against forward.

    The pull of the face ahead is left out, as in the hold curve: it acts only within theta0
    of the landing and adds at most T0 theta0 to the energy, most of which the landing takes.
    """
    drag = bodies.drag_N_m * footing.rub
    if not footing.magnets:
        return drag
    tilt = bodies.ops.absolute(angle_rad - footing.face_rad)
    pull = bodies.magnet_torque_N_m * bodies.ops.exp(-tilt / bodies.magnet_angle_rad)
    return bodies.ops.where(footing.from_low, pull, -pull) + drag


def stick(
    bodies: Bodies, footing: Footing, torque_N_m: Floats, angle_rad: Floats, rate_rad_s: Floats
) -> Pull:
    """The corner stays where it is: a hinge. Ground force by Newton's second law.

    (I + m r^2) theta'' = tau + m g rx - T_hold;  N = m (g - rx theta'' - rz theta'^2);
    F = m (rz theta'' - rx theta'^2). With the wheel locked N = 0 is the lift-off condition
    theta'^2 = g (1 - (m r^2/Ie) cos^2 phi) / (r sin phi).
    """
    rx, rz = turned(bodies.ops, footing.arm, angle_rad)
    angular = _hinged(bodies, footing, torque_N_m, angle_rad, rx)
    squared = rate_rad_s * rate_rad_s
    normal = bodies.mass_kg * (bodies.gravity_m_s2 - rx * angular - rz * squared)
    friction = bodies.mass_kg * (rz * angular - rx * squared)
    return Pull(angular, 0.0 * angular, normal, friction)


def hinged_rad_s2(
    bodies: Bodies, footing: Footing, torque_N_m: Floats, angle_rad: Floats
) -> Floats:
    """Angular acceleration about a corner that sticks: all that a held body's motion needs."""
    return _hinged(
        bodies, footing, torque_N_m, angle_rad, turned(bodies.ops, footing.arm, angle_rad)[0]
    )


def _hinged(
    bodies: Bodies, footing: Footing, torque_N_m: Floats, angle_rad: Floats, rx: Floats
) -> Floats:
    weight = bodies.mass_kg * bodies.gravity_m_s2 * rx
    moment = torque_N_m + weight - hold_N_m(bodies, footing, angle_rad)
    return moment / (footing.inertia_kg_m2 + bodies.mass_kg * footing.radius2_m2)


def slide(
    bodies: Bodies, footing: Footing, torque_N_m: Floats, angle_rad: Floats, rate_rad_s: Floats
) -> Pull:
    """Corners that slide under Coulomb friction F = -way mu N; those with ``way`` 0 stick.

    I theta'' = tau + rx N - rz F with N = m (g - rx theta'' - rz theta'^2), solved for
    theta''; nothing holds a free body. Where I + m rx (rx + way mu rz) is not positive (Painleve's
    paradox, mu above about 1.15 for a uniform cube) rigid sliding has no answer; the corner then
    jams and is taken to stick.
    """
    stuck = stick(bodies, footing, torque_N_m, angle_rad, rate_rad_s)
    rx, rz = turned(bodies.ops, footing.arm, angle_rad)
    mass = bodies.mass_kg
    lever = rx + footing.way * bodies.friction * rz
    resisting = footing.inertia_kg_m2 + mass * rx * lever
    sliding = (footing.way != 0) & (resisting > 0.0)
    squared = rate_rad_s * rate_rad_s
    driving = torque_N_m + mass * (bodies.gravity_m_s2 - rz * squared) * lever
    where = bodies.ops.where
    freely = driving / where(sliding, resisting, 1.0)
    angular = where(sliding, freely, stuck.angular_rad_s2)
    normal = mass * (bodies.gravity_m_s2 - rx * angular - rz * squared)
    friction = where(sliding, -footing.way * bodies.friction * normal, stuck.friction_N)
    along = friction / mass - (rz * angular - rx * squared)
    return Pull(angular, where(sliding, along, 0.0), normal, friction)


def momentum_about(
    bodies: Bodies,
    arm: tuple[Floats, Floats],
    inertia_kg_m2: Floats,
    rate_rad_s: Floats,
    velocity_m_s: tuple[Floats, Floats],
) -> Floats:
    """Angular momentum about the corner at the foot of an arm: I w + m (rz vx - rx vz)."""
    (rx, rz), (vx, vz) = arm, velocity_m_s
    return inertia_kg_m2 * rate_rad_s + bodies.mass_kg * (rz * vx - rx * vz)


def landing_rate_rad_s(
    bodies: Bodies,
    arm: tuple[Floats, Floats],
    inertia_kg_m2: Floats,
    momentum: Floats,
    rebound_m_s: tuple[Floats, Floats],
) -> Floats:
    """Body rate after a corner strikes the floor.

    Angular momentum about that corner survives, since the impulse passes through it.
    ``rebound_m_s`` is the corner's velocity after; none where it sticks (plastic: a uniform
    cube that comes down flat, wheel locked, keeps Ic/Ie = 1/4 of its rate). With restitution e
    the corner's whole velocity returns times -e, so that the energy lost is 1 - e^2 of what a
    plastic landing loses; returning the upward part alone can make energy out of nothing
    where the centre of mass is not above the corner.
    """
    about_corner = inertia_kg_m2 + bodies.mass_kg * (arm[0] * arm[0] + arm[1] * arm[1])
    nothing = 0.0 * inertia_kg_m2
    carried = momentum_about(bodies, arm, nothing, nothing, rebound_m_s)
    return (momentum - carried) / about_corner
