"""The phase in flight: no corner touches the floor.

Owns ballistic motion in closed form: the centre of mass on its parabola, the body at constant
rate once the wheel is locked, under the brake's torque alone until then. Air is left out.
"""

from typing import Final

from sim_link.mechanics import brake
from sim_link.mechanics.arrays import Floats
from sim_link.mechanics.bodies import Bodies, lowest_corner, standing_arm_m, turned
from sim_link.mechanics.brake import Brakes
from sim_link.mechanics.hold import GRAVITY_M_S2
from sim_link.mechanics.landing import touch_down
from sim_link.mechanics.roots import first_root
from sim_link.mechanics.state import State, advance, lock, turning_inertia_kg_m2, wheel_after

_CLEARANCE: Final = 1e-9
"""A corner this part of the side below the floor has landed."""
_NEVER: Final = 1e9


def flight_step(bodies: Bodies, brakes: Brakes, state: State, step_s: Floats) -> None:
    """Advance by at most a step; each stops where its wheel locks or a corner meets the floor."""

    ops = bodies.ops

    def locks_after(t_s: Floats) -> Floats:
        _, rate = _turned(bodies, brakes, state, t_s)
        left = wheel_after(bodies, brakes, state, t_s) - rate
        return ops.where(state.slipping, left / ops.maximum(state.start_rad_s, 1.0), _NEVER)

    def clear_after(t_s: Floats) -> Floats:
        angle, _ = _turned(bodies, brakes, state, t_s)
        clear = _clear_m(bodies, angle)
        return (_height_m(state, t_s) - clear) / bodies.side_m + _CLEARANCE

    def margin(t_s: Floats) -> Floats:
        return ops.minimum(locks_after(t_s), clear_after(t_s))

    late = margin(step_s)
    over = late <= 0.0
    if ops.some(over):
        early = margin(0.0 * step_s)
        step_s = first_root(ops, margin, step_s, early, ops.where(over, late, 0.0))
    lands = clear_after(step_s) <= 0.0
    locks = state.slipping & (locks_after(step_s) <= 0.0)
    _move(bodies, brakes, state, step_s)
    if ops.some(locks):
        lock(ops, state, locks)
    if ops.some(lands):
        touch_down(bodies, state, lands)


def _move(bodies: Bodies, brakes: Brakes, state: State, step_s: Floats) -> None:
    angle, rate = _turned(bodies, brakes, state, step_s)
    wheel = wheel_after(bodies, brakes, state, step_s)
    ops = bodies.ops
    to_apex_s = ops.minimum(ops.maximum(state.vz_m_s / GRAVITY_M_S2, 0.0), step_s)
    state.apex_m = ops.maximum(state.apex_m, _height_m(state, to_apex_s))
    state.height_m = _height_m(state, step_s)
    advance(ops, state, step_s, angle, rate)
    state.vz_m_s = state.vz_m_s - GRAVITY_M_S2 * step_s
    state.wheel_rad_s = ops.where(state.slipping, wheel, rate)


def _height_m(state: State, t_s: Floats) -> Floats:
    return state.height_m + (state.vz_m_s - 0.5 * GRAVITY_M_S2 * t_s) * t_s


def _clear_m(bodies: Bodies, angle_rad: Floats) -> Floats:
    """Height of the centre of mass at which the lowest corner touches the floor."""
    corner = lowest_corner(bodies.ops, angle_rad) % 4
    return turned(bodies.ops, standing_arm_m(bodies, corner), angle_rad)[1]


def _turned(bodies: Bodies, brakes: Brakes, state: State, t_s: Floats) -> tuple[Floats, Floats]:
    """Angle and rate so long from now: the brake's torque alone acts, and only while it slips."""
    angle = state.angle_rad + state.rate_rad_s * t_s
    ops = bodies.ops
    if not ops.some(state.slipping):
        return angle, state.rate_rad_s
    since = state.t_s - brakes.onset_s
    inertia = turning_inertia_kg_m2(bodies, state)
    before = brake.impulse_N_m_s(brakes, since)
    gained = brake.impulse_N_m_s(brakes, since + t_s) - before
    swept = brake.impulse_integral_N_m_s2(brakes, since + t_s)
    swept = swept - brake.impulse_integral_N_m_s2(brakes, since) - before * t_s
    more = ops.where(state.slipping, swept / inertia, 0.0)
    return angle + more, state.rate_rad_s + ops.where(state.slipping, gained / inertia, 0.0)
