"""The body's motion from the moment of braking until it lies still.

Owns the sequence of phases and the facts of the whole. The phases are corner.py's and
flight.py's, the landings landing.py's. Knows no threshold (mechanics.py), no time of day and
no chance: the same body and speed give the same motion.

Model: planar and rigid; brake torque constant from its onset until the wheel turns with the
body, then locked for good; Coulomb friction, one coefficient for sticking and sliding. A held
module keeps its hinge and hinges on the next edge when it comes down. One that is not held
sticks to the floor, slides, or flies. Not modelled: sliding in the instant of a landing
(landing.py), and how far the module moves over the floor, only which face comes up.
"""

import math
from typing import Final

from sim_link import contact
from sim_link.contact import QUARTER, Body
from sim_link.corner import corner_step
from sim_link.flight import flight_step
from sim_link.hold import GRAVITY_M_S2
from sim_link.landing import lie_flat
from sim_link.motion import Moment, MotionResult, Phase, State, Watch

MAX_MOTION_S: Final = 20.0
"""Longest motion followed; beyond it the result says ``settled`` False."""
_STEP_OF_PENDULUM: Final = 0.04
"""Longest step, as a part of sqrt(a/g): errors of 1e-8 a step by the fourth-order rule."""
_STEP_RAD: Final = 0.05
_STEPS_A_MAGNET: Final = 4
"""Steps while the body turns by the magnets' angle theta0."""
_STEPS_A_BRAKE: Final = 50


def tumble(
    body: Body, onset_s: float, wheel_rad_s: float, watch: Watch | None = None
) -> MotionResult:
    """Brake the wheel from ``wheel_rad_s`` (zero or more) and follow the body until it rests.

    ``watch`` is shown every moment computed, for a motion trace or a check of energy.
    """
    state = State(t_s=onset_s, wheel_rad_s=wheel_rad_s)
    run_down_s = wheel_rad_s * body.wheel_inertia_kg_m2 / body.brake_torque_N_m
    longest_s = _STEP_OF_PENDULUM * math.sqrt(body.side_m / GRAVITY_M_S2)
    brake_step_s = min(longest_s, run_down_s / _STEPS_A_BRAKE)
    longest_rad = min(_STEP_RAD, body.magnet_angle_rad / _STEPS_A_MAGNET)
    lie_flat(body, state, 0)
    while state.phase is not Phase.FLAT and state.t_s < MAX_MOTION_S:
        if watch is not None:
            watch(_moment(body, state))
        step_s = brake_step_s if state.slipping else longest_s
        step_s = min(step_s, longest_rad / max(abs(state.rate_rad_s), 1e-9))
        step = corner_step if state.phase is Phase.CORNER else flight_step
        step(body, state, step_s)
    if watch is not None:
        watch(_moment(body, state))
    return _result(state)


def _result(state: State) -> MotionResult:
    return MotionResult(
        faces=round(state.angle_rad / QUARTER),
        turned_rad=state.angle_rad,
        peak_tilt_rad=state.peak_tilt_rad,
        peak_rate_rad_s=state.peak_rate_rad_s,
        brake_s=state.brake_s,
        settle_s=state.t_s,
        settled=state.phase is Phase.FLAT,
    )


def _moment(body: Body, state: State) -> Moment:
    rx, height = contact.arm_m(body, state.corner, state.angle_rad)
    vx, vz = state.slide_m_s + state.rate_rad_s * height, -state.rate_rad_s * rx
    if state.phase is Phase.FLIGHT:
        height, vx, vz = state.height_m, state.vx_m_s, state.vz_m_s
    return Moment(
        t_s=state.t_s,
        phase=state.phase,
        angle_rad=state.angle_rad,
        rate_rad_s=state.rate_rad_s,
        wheel_rad_s=state.wheel_rad_s,
        height_m=height,
        vx_m_s=vx,
        vz_m_s=vz,
        slipping=state.slipping,
    )
