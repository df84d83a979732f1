"""Landings: a corner or a face meets the floor, and what the body does next.

Owns the choice between going on, bouncing off and lying still. The impulse itself is
contact.py's; the phases before and after are corner.py's and flight.py's.

The corner that strikes sticks in that instant, whatever the friction, and a sliding corner's
forward speed ends there: sliding through a landing is not modelled. A locked wheel stays
locked through it.
"""

from typing import Final

from sim_link import contact
from sim_link.contact import QUARTER, Body
from sim_link.hold import GRAVITY_M_S2
from sim_link.motion import Phase, State, lock

_STILL_ENERGY: Final = 1e-4
"""A body flat on its face with less than this part of the energy m g a lies still."""


def lie_flat(body: Body, state: State, face: int) -> None:
    """Lie on a face without moving: lift again if the brake beats the hold, else run down."""
    state.angle_rad, state.rate_rad_s, state.slide_m_s = face * QUARTER, 0.0, 0.0
    state.corner = state.face = face
    state.phase = Phase.FLAT
    if not state.slipping:
        return
    footing = contact.Footing(face, face, contact.push(body, slipping=True))
    lifts = contact.stick(body, footing, state.angle_rad, 0.0).angular_rad_s2 > 0.0
    if lifts and state.wheel_rad_s > 0.0:
        state.phase = Phase.CORNER
        return
    state.t_s += state.wheel_rad_s * body.wheel_inertia_kg_m2 / body.brake_torque_N_m
    lock(state)


def come_down(body: Body, state: State) -> None:
    """A face meets the floor while the body turns about a corner of it.

    The body goes on about the new corner if the landing leaves it enough; otherwise the old
    one takes it back, with the rate that restitution leaves (plastic: none).
    """
    before, old = state.rate_rad_s, state.corner
    face, new = (old + 1, old + 1) if before > 0.0 else (old, old - 1)
    state.angle_rad, state.face = face * QUARTER, face
    rx, rz = contact.arm_m(body, old, state.angle_rad)
    _strike(body, state, new, (state.slide_m_s + before * rz, -before * rx))
    if state.phase is Phase.FLIGHT:
        return
    if state.rate_rad_s * before <= 0.0:
        state.rate_rad_s, state.corner = -body.restitution * before, old
    if 0.5 * body.inertia_kg_m2 * state.rate_rad_s**2 < _small_energy_J(body):
        lie_flat(body, state, face)


def touch_down(body: Body, state: State) -> None:
    """The lowest corner meets the floor at the end of a flight."""
    corner = contact.lowest_corner(state.angle_rad)
    _strike(body, state, corner, (state.vx_m_s, state.vz_m_s))


def _strike(body: Body, state: State, corner: int, velocity: tuple[float, float]) -> None:
    """Let a corner strike the floor; a free body with enough rebound is in flight after."""
    arm = contact.arm_m(body, corner, state.angle_rad)
    inertia = contact.push(body, state.slipping).inertia_kg_m2
    momentum = contact.momentum_about(body, arm, inertia, state.rate_rad_s, velocity)
    struck_x = velocity[0] - state.rate_rad_s * arm[1]
    struck_z = velocity[1] + state.rate_rad_s * arm[0]
    rebound = (-body.restitution * struck_x, -body.restitution * struck_z)
    bounces = 0.5 * body.mass_kg * rebound[1] ** 2 > _small_energy_J(body)
    if not bounces:
        rebound = (0.0, 0.0)
    rate = contact.landing_rate_rad_s(body, arm, inertia, momentum, rebound)
    state.rate_rad_s, state.corner, state.slide_m_s = rate, corner, 0.0
    state.phase = Phase.FLIGHT if bounces and not body.held else Phase.CORNER
    state.height_m = arm[1]
    state.vx_m_s = rebound[0] + rate * arm[1]
    state.vz_m_s = rebound[1] - rate * arm[0]


def _small_energy_J(body: Body) -> float:
    return _STILL_ENERGY * body.mass_kg * GRAVITY_M_S2 * body.side_m
