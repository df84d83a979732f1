"""Landings: a corner or a face meets the floor, and what the bodies do next.

Owns the choice between going on, bouncing off and lying still. The impulse itself is
forces.py's; the phases before and after are corner.py's and flight.py's.

The corner that strikes sticks in that instant, whatever the friction, and a sliding corner's
forward speed ends there: sliding through a landing is not modelled. A locked wheel stays
locked through it.
"""

from typing import Final, cast

from sim_link.mechanics import brake, forces
from sim_link.mechanics.arrays import Bools, Floats, Ints
from sim_link.mechanics.bodies import (
    QUARTER,
    Bodies,
    arcs_back,
    arcs_forward,
    lowest_corner,
    standing_arm_m,
    turned,
)
from sim_link.mechanics.hold import GRAVITY_M_S2
from sim_link.mechanics.state import (
    Phase,
    State,
    drive_torque_N_m,
    lock,
    turning_inertia_kg_m2,
)

_STILL_ENERGY: Final = 1e-4
"""A body flat on its face with less than this part of the energy m g a lies still."""


def lie_flat(bodies: Bodies, brakes: brake.Brakes, state: State, where: Bools, face: Ints) -> None:
    """Lie on a face without moving: lift again if the brake beats the hold, else run down."""
    ops = bodies.ops
    state.angle_rad = ops.where(where, face * QUARTER, state.angle_rad)
    state.rate_rad_s = ops.where(where, 0.0, state.rate_rad_s)
    state.slide_m_s = ops.where(where, 0.0, state.slide_m_s)
    state.face = ops.choose(where, face, state.face)
    state.rub = ops.choose(where, 1, state.rub)
    state.turn_through(ops, where, arcs_forward(bodies, face))
    state.phase = ops.choose(where, int(Phase.FLAT), state.phase)
    slipping = where & state.slipping
    if not ops.some(slipping):
        return
    lifts = slipping & (state.wheel_rad_s > 0.0) & (_lifting_rad_s2(bodies, brakes, state) > 0.0)
    state.phase = ops.choose(lifts, int(Phase.CORNER), state.phase)
    run_down(bodies, brakes, state, slipping & ops.no(lifts))


def _lifting_rad_s2(bodies: Bodies, brakes: brake.Brakes, state: State) -> Floats:
    still = 0 * state.face
    foot = forces.footing(
        bodies,
        standing_arm_m(bodies, state.corner),
        (state.face, state.low == state.face),
        turning_inertia_kg_m2(bodies, state),
        (still, still + 1),
    )
    torque = drive_torque_N_m(bodies, brakes, state, 0.0 * state.t_s)
    return forces.hinged_rad_s2(bodies, foot, torque, state.angle_rad)


def run_down(bodies: Bodies, brakes: brake.Brakes, state: State, where: Bools) -> None:
    """The body lies still under its brake until the wheel has stopped."""
    ops = bodies.ops
    if ops.some(where):
        momentum = state.start_rad_s * bodies.wheel_inertia_kg_m2
        end_s = brakes.onset_s + brake.stopping_s(brakes, momentum)
        state.t_s = ops.where(where, ops.maximum(end_s, state.t_s), state.t_s)
        lock(ops, state, where)


def come_down(bodies: Bodies, brakes: brake.Brakes, state: State, where: Bools) -> None:
    """Faces meet the floor while their bodies turn about a corner of it.

    A body goes on about the new corner if the landing leaves it enough; otherwise the old
    one takes it back, with the rate that restitution leaves (plastic: none). One that falls back
    against the wall it hung on is caught by that face: it does not roll down the wall.
    """
    ops, before = bodies.ops, state.rate_rad_s
    forward = before > 0.0
    face = ops.choose(forward, state.high, state.low)
    angle = cast(Floats, face * QUARTER)
    rx, rz = turned(ops, standing_arm_m(bodies, state.corner), angle)
    state.angle_rad = ops.where(where, angle, state.angle_rad)
    state.face = ops.choose(where, face, state.face)
    ahead, back = arcs_forward(bodies, face), arcs_back(bodies, face)
    corner = ops.choose(forward, ahead.corner, back.corner)
    struck = (state.slide_m_s + before * rz, -before * rx)
    rate = _strike(bodies, state, where, corner, struck)
    on = where & (state.phase == Phase.CORNER)
    caught = bodies.hanging & ops.no(forward)
    returns = on & ((rate * before <= 0.0) | caught)
    state.rate_rad_s = ops.where(returns, -bodies.restitution * before, state.rate_rad_s)
    goes_on = where & ops.no(returns)
    state.turn_through(ops, goes_on & forward, ahead)
    state.turn_through(ops, goes_on & ops.no(forward), back)
    state.rub = ops.choose(on, ops.sign(state.rate_rad_s), state.rub)
    small = 0.5 * bodies.inertia_kg_m2 * state.rate_rad_s**2 < _small_energy_J(bodies)
    if ops.some(on & small):
        lie_flat(bodies, brakes, state, on & small, face)


def touch_down(bodies: Bodies, state: State, where: Bools) -> None:
    """The lowest corners meet the floor at the end of a flight."""
    arcs = arcs_forward(bodies, lowest_corner(bodies.ops, state.angle_rad))
    _strike(bodies, state, where, arcs.corner, (state.vx_m_s, state.vz_m_s))
    state.turn_through(bodies.ops, where, arcs)


def _strike(
    bodies: Bodies, state: State, where: Bools, corner: Ints, velocity: tuple[Floats, Floats]
) -> Floats:
    """Let corners strike the floor; a free body with enough rebound is in flight after.

    Returns the rates that the landing would leave everybody.
    """
    ops = bodies.ops
    arm = turned(ops, standing_arm_m(bodies, corner), state.angle_rad)
    inertia = turning_inertia_kg_m2(bodies, state)
    momentum = forces.momentum_about(bodies, arm, inertia, state.rate_rad_s, velocity)
    struck_x = velocity[0] - state.rate_rad_s * arm[1]
    struck_z = velocity[1] + state.rate_rad_s * arm[0]
    rebound_z = -bodies.restitution * struck_z
    bounces = 0.5 * bodies.mass_kg * rebound_z**2 > _small_energy_J(bodies)
    rebound = (
        ops.where(bounces, -bodies.restitution * struck_x, 0.0),
        ops.where(bounces, rebound_z, 0.0),
    )
    rate = forces.landing_rate_rad_s(bodies, arm, inertia, momentum, rebound)
    flies = bounces & ops.no(bodies.held)
    phase = ops.choose(flies, int(Phase.FLIGHT), int(Phase.CORNER))
    state.rate_rad_s = ops.where(where, rate, state.rate_rad_s)
    state.slide_m_s = ops.where(where, 0.0, state.slide_m_s)
    state.phase = ops.choose(where, phase, state.phase)
    state.height_m = ops.where(where, arm[1], state.height_m)
    state.vx_m_s = ops.where(where, rebound[0] + rate * arm[1], state.vx_m_s)
    state.vz_m_s = ops.where(where, rebound[1] - rate * arm[0], state.vz_m_s)
    return rate


def _small_energy_J(bodies: Bodies) -> Floats:
    return _STILL_ENERGY * bodies.mass_kg * GRAVITY_M_S2 * bodies.side_m
