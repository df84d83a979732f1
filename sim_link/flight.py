"""The phase in flight: no corner touches the floor.

Owns ballistic motion in closed form: the centre of mass on its parabola, the body at constant
rate once the wheel is locked, under the brake's torque alone until then. Air is left out.
"""

from typing import Final

from sim_link import contact
from sim_link.contact import Body
from sim_link.hold import GRAVITY_M_S2
from sim_link.landing import touch_down
from sim_link.motion import State, advance, first_time, lock

_CLEARANCE: Final = 1e-9
"""A corner this part of the side below the floor has landed."""


def flight_step(body: Body, state: State, step_s: float) -> None:
    """Advance by at most a step; stop where the wheel locks or a corner meets the floor."""
    drive = contact.push(body, state.slipping)
    turning = drive.torque_N_m / drive.inertia_kg_m2
    slowing = drive.torque_N_m / body.wheel_inertia_kg_m2
    to_lock_s = step_s
    if state.slipping:
        to_lock_s = (state.wheel_rad_s - state.rate_rad_s) / (turning + slowing)
    locks = state.slipping and to_lock_s <= step_s
    step_s = min(step_s, to_lock_s)

    def after(t_s: float) -> tuple[float, float]:
        angle = state.angle_rad + (state.rate_rad_s + turning * t_s / 2) * t_s
        return angle, state.height_m + (state.vz_m_s - GRAVITY_M_S2 * t_s / 2) * t_s

    def landed(t_s: float) -> bool:
        angle, height = after(t_s)
        _, clear = contact.arm_m(body, contact.lowest_corner(angle), angle)
        return height < clear - _CLEARANCE * body.side_m

    lands = landed(step_s)
    if lands:
        end_s = first_time(landed, step_s)
        locks = locks and end_s == step_s
        step_s = end_s
    angle, state.height_m = after(step_s)
    advance(state, step_s, angle, state.rate_rad_s + turning * step_s)
    state.vz_m_s -= GRAVITY_M_S2 * step_s
    state.wheel_rad_s = state.wheel_rad_s - slowing * step_s if state.slipping else state.rate_rad_s
    if locks:
        lock(state)
    if lands:
        touch_down(body, state)
