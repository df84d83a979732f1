"""Bodies' motions from the moment of braking until they lie still.

Owns the sequence of phases and the facts of the whole, for any number of bodies at once. The phases
are corner.py's and flight.py's, the landings landing.py's. Knows no threshold (threshold.py), no
time of day and no chance: the same body and speed give the same motion, alone or beside others.

Model: planar and rigid; the brake's torque acts from its onset until the wheel turns with the
body, then it is locked for good; Coulomb friction, one coefficient for sticking and sliding. A held
module keeps its hinge and hinges on the next edge when it comes down. One that is not held
sticks to the floor, slides, or flies. Not modelled: sliding in the instant of a landing
(landing.py), how far the module moves over the floor, only which face comes up; and where its
neighbours end: on a wall or over a crest it finds an edge wherever it turns.
"""

from collections.abc import Sequence
from typing import Final

import numpy as np

from sim_link.mechanics import corner, flight
from sim_link.mechanics.arrays import ARRAYS, Bools, Floats
from sim_link.mechanics.bodies import (
    QUARTER,
    Attempt,
    Bodies,
    bodies_of,
    standing_arm_m,
    turned,
)
from sim_link.mechanics.brake import Brakes, stopping_s
from sim_link.mechanics.hold import GRAVITY_M_S2
from sim_link.mechanics.landing import lie_flat
from sim_link.mechanics.state import Moment, MotionResult, Phase, State, Watch

MAX_MOTION_S: Final = 20.0
"""Longest motion followed; beyond it the result says ``settled`` False."""
_STEP_OF_PENDULUM: Final = 0.1
"""Longest step, as a part of sqrt(a/g): with these strides energy is kept to 1e-6."""
_STEP_RAD: Final = 0.1
_STEPS_A_MAGNET: Final = 5
"""Steps while the body turns by the magnets' angle theta0, where they pull."""
_STEPS_A_BRAKE: Final = 8
_STEPS: Final = ((Phase.CORNER, corner.corner_step), (Phase.FLIGHT, flight.flight_step))


def tumble(attempts: Sequence[Attempt], watch: Watch | None = None) -> list[MotionResult]:
    """Brake the wheels and follow the bodies until each rests; results in the same order.

    ``watch`` is shown every moment of a lone body, for a motion trace or a check of energy.
    """
    bodies = bodies_of(attempts)
    brakes = bodies.brakes
    ops, speeds = bodies.ops, [attempt.wheel_rad_s for attempt in attempts]
    state = State.before(bodies, np.array(speeds) if ops is ARRAYS else speeds[0])  # type: ignore[arg-type]
    lie_flat(bodies, brakes, state, state.slipping, state.face)
    strides = _Strides(bodies, brakes, state)
    while ops.some(live := _moving(state)):
        if watch is not None:
            watch(_moment(bodies, state))
        now, steps_s = state.phase, strides.steps_s(bodies, state)
        for phase, step in _STEPS:
            there = live & (now == phase)
            if ops.every(there):
                step(bodies, brakes, state, steps_s)
            elif ops.some(there):
                places = there.nonzero()[0]
                some, part = bodies.take(places), state.take(places)
                step(some, some.brakes, part, steps_s[places])
                state.put(places, part)
    if watch is not None:
        watch(_moment(bodies, state))
    return _results(bodies, state)


def _moving(state: State) -> Bools:
    moving: Bools = (state.phase != Phase.FLAT) & (state.t_s < MAX_MOTION_S)
    return moving


class _Strides:
    """How far bodies may be followed in one step."""

    def __init__(self, bodies: Bodies, brakes: Brakes, state: State) -> None:
        momentum = state.start_rad_s * bodies.wheel_inertia_kg_m2
        ops = bodies.ops
        self._longest_s = _STEP_OF_PENDULUM * ops.sqrt(bodies.side_m / GRAVITY_M_S2)
        brake_s = stopping_s(brakes, momentum) / _STEPS_A_BRAKE
        self._brake_s = ops.minimum(self._longest_s, ops.maximum(brake_s, 1e-9))
        self._magnets = ops.some(bodies.magnet_torque_N_m)

    def steps_s(self, bodies: Bodies, state: State) -> Floats:
        """One step an element, seconds. Near its face a body takes short ones, for the magnets;
        the step may grow as e^(tilt/5 theta0), since the rule's error goes with its fifth power."""
        ops, step_rad = bodies.ops, bodies.ops.like(state.angle_rad, _STEP_RAD)
        if self._magnets:
            tilt = ops.absolute(state.angle_rad - state.face * QUARTER)
            near = ops.exp(ops.minimum(tilt / (5.0 * bodies.magnet_angle_rad), 50.0))
            fine = bodies.magnet_angle_rad / _STEPS_A_MAGNET * near
            step_rad = ops.where(bodies.magnet_torque_N_m > 0.0, fine, _STEP_RAD)
            step_rad = ops.minimum(step_rad, _STEP_RAD)
        step_s = ops.where(state.slipping, self._brake_s, self._longest_s)
        return ops.minimum(step_s, step_rad / ops.maximum(ops.absolute(state.rate_rad_s), 1e-9))


def _results(bodies: Bodies, state: State) -> list[MotionResult]:
    ops = bodies.ops
    rest_m = standing_arm_m(bodies, 0 * state.corner)[1]
    risen_m = ops.maximum(state.apex_m - rest_m, 0.0)
    nearest = ops.floor(state.angle_rad / QUARTER + 0.5)  # in flat, drag may stop it short of one
    columns = (
        ops.choose(bodies.gravity_m_s2 > 0.0, nearest, state.face),
        state.angle_rad,
        state.peak_tilt_rad,
        state.peak_rate_rad_s,
        state.brake_s,
        state.t_s,
        state.phase == Phase.FLAT,
        state.lock_rad,
        state.lift_rad_s,
        ops.where(state.lift_rad_s > 0.0, risen_m, 0.0),
    )
    if ops is not ARRAYS:
        return [MotionResult(*columns)]  # type: ignore[arg-type]
    return [MotionResult(*row) for row in zip(*(each.tolist() for each in columns), strict=True)]


def _moment(bodies: Bodies, state: State) -> Moment:
    """The present moment of a lone body."""
    rx, height = turned(bodies.ops, standing_arm_m(bodies, state.corner), state.angle_rad)
    vx, vz = state.slide_m_s + state.rate_rad_s * height, -state.rate_rad_s * rx
    if state.phase == Phase.FLIGHT:
        height, vx, vz = state.height_m, state.vx_m_s, state.vz_m_s
    return Moment(
        t_s=float(state.t_s),
        phase=Phase(int(state.phase)),
        angle_rad=float(state.angle_rad),
        rate_rad_s=float(state.rate_rad_s),
        wheel_rad_s=float(state.wheel_rad_s if state.slipping else state.rate_rad_s),
        height_m=float(height),
        vx_m_s=float(vx),
        vz_m_s=float(vz),
        slipping=bool(state.slipping),
    )
