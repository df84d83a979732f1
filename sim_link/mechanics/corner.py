"""The phase on a corner: bodies turn about it, sticking or sliding, until something ends it.

Owns the steps of this phase and its events: a face comes down, the wheel locks, the corner
begins or ceases to slide, a rubbing face stops, the body leaves the floor. Forces are forces.py's.
"""

from collections.abc import Callable
from typing import Final, NamedTuple

from sim_link.mechanics import forces
from sim_link.mechanics.arrays import ARRAYS, Bools, Floats, Ints
from sim_link.mechanics.bodies import QUARTER, Bodies, standing_arm_m, turned
from sim_link.mechanics.brake import Brakes
from sim_link.mechanics.forces import Footing
from sim_link.mechanics.landing import come_down, run_down
from sim_link.mechanics.roots import first_root
from sim_link.mechanics.state import (
    Phase,
    State,
    advance,
    drive_torque_N_m,
    lock,
    turning_inertia_kg_m2,
    wheel_after,
)

_NEVER: Final = 1e9


class _Step(NamedTuple):
    """What is the same for all stages of a step."""

    bodies: Bodies
    brakes: Brakes
    state: State
    foot: Footing
    all_held: bool

    def take(self, places: Ints) -> "_Step":
        """Some of them, by place."""
        bodies, state = self.bodies.take(places), self.state.take(places)
        return _Step(bodies, bodies.brakes, state, self.foot.take(places), self.all_held)


class _Swing(NamedTuple):
    angle_rad: Floats
    rate_rad_s: Floats
    slide_m_s: Floats


def corner_step(bodies: Bodies, brakes: Brakes, state: State, step_s: Floats) -> None:
    """Advance by at most a step on the standing corners; each stops at its first event."""
    foot, flies = _footing(bodies, brakes, state)
    step = _Step(bodies, brakes, state, foot, bodies.ops.every(bodies.held))
    start = _Swing(state.angle_rad, state.rate_rad_s, state.slide_m_s)
    ops = bodies.ops
    step_s = ops.where(flies, 0.0, step_s)
    end = _follow(step, start, step_s)
    late = _margin(step, start, end, step_s)
    over = (late <= 0.0) & ops.no(flies)
    if ops.some(over):
        step_s = _events_s(step, over, step_s, late)
        end = _follow(step, start, step_s)
    _take_over(step, end, step_s, ops.no(flies))
    if ops.some(flies):
        _take_off(bodies, state, flies)


def _events_s(step: _Step, over: Bools, step_s: Floats, late: Floats) -> Floats:
    """The steps, shortened to the first event where one happens."""
    if step.bodies.ops is not ARRAYS:
        return _event_s(step, step_s, late)
    places = over.nonzero()[0]
    shortened = step_s.copy()
    shortened[places] = _event_s(step.take(places), step_s[places], late[places])
    return shortened


def _event_s(step: _Step, step_s: Floats, late: Floats) -> Floats:
    """When within a step the first event happens, where one does by its end."""
    state = step.state
    start = _Swing(state.angle_rad, state.rate_rad_s, state.slide_m_s)
    early = _margin(step, start, start, 0.0 * step_s)

    def margin(t_s: Floats) -> Floats:
        return _margin(step, start, _follow(step, start, t_s), t_s)

    return first_root(step.bodies.ops, margin, step_s, early, late)


def _take_over(step: _Step, end: _Swing, step_s: Floats, moved: Bools) -> None:
    """Make a step's end the present, and let happen what happens there."""
    bodies, brakes, state, foot = step.bodies, step.brakes, step.state, step.foot
    ops = bodies.ops
    slowed = wheel_after(bodies, brakes, state, step_s)
    wheel = ops.where(state.slipping, slowed, end.rate_rad_s)
    advance(ops, state, step_s, end.angle_rad, end.rate_rad_s)
    state.slide_m_s = ops.where(end.slide_m_s * foot.way > 0.0, end.slide_m_s, 0.0)
    locks = moved & state.slipping & (wheel <= state.rate_rad_s)
    state.wheel_rad_s = wheel
    if ops.some(locks):
        lock(ops, state, locks)
    low, high = state.low * QUARTER, state.high * QUARTER
    back, on = state.rate_rad_s < 0.0, state.rate_rad_s > 0.0
    down = moved & ((back & (state.angle_rad <= low)) | (on & (state.angle_rad >= high)))
    if ops.some(down):
        come_down(bodies, brakes, state, down)
    if ops.some(foot.rub):
        _rub(bodies, brakes, state, moved & ops.no(down) & (foot.rub != 0))


def _rub(bodies: Bodies, brakes: Brakes, state: State, rubbing: Bools) -> None:
    """A face that rubs and has come to a stop goes on, turns back, or stays for good."""
    stopped = rubbing & (state.rate_rad_s * state.rub <= 0.0)
    ops = bodies.ops
    if not ops.some(stopped):
        return
    state.rate_rad_s = ops.where(stopped, 0.0, state.rate_rad_s)
    pull = _free_torque_N_m(bodies, brakes, state)
    moves = stopped & (ops.absolute(pull) > bodies.drag_N_m)
    state.rub = ops.choose(moves, ops.sign(pull), state.rub)
    stays = stopped & ops.no(moves)
    state.phase = ops.choose(stays, int(Phase.FLAT), state.phase)
    run_down(bodies, brakes, state, stays & state.slipping)


def _free_torque_N_m(bodies: Bodies, brakes: Brakes, state: State) -> Floats:
    """Torque on bodies at rest, the drag of their faces left out."""
    way = 0 * state.face
    foot = _stand(bodies, state, way, way)
    torque = drive_torque_N_m(bodies, brakes, state, 0.0 * state.t_s)
    inertia = foot.inertia_kg_m2 + bodies.mass_kg * foot.radius2_m2
    return forces.hinged_rad_s2(bodies, foot, torque, state.angle_rad) * inertia


def _stand(bodies: Bodies, state: State, way: Ints, rub: Ints) -> Footing:
    arm, inertia = standing_arm_m(bodies, state.corner), turning_inertia_kg_m2(bodies, state)
    return forces.footing(bodies, arm, (state.face, state.face == state.low), inertia, (way, rub))


def _footing(bodies: Bodies, brakes: Brakes, state: State) -> tuple[Footing, Bools]:
    """How the corners stand, and who does not stand at all and leaves the floor.

    A held corner sticks and never leaves. A free one slides on while it moves, begins to
    slide where sticking would need more friction than there is (|F| > mu N), and leaves
    where the floor would have to pull.
    """
    ops, way = bodies.ops, 0 * state.face
    rub = ops.choose(bodies.drag_N_m > 0.0, state.rub, 0)
    if ops.every(bodies.held):
        return _stand(bodies, state, way, rub), ops.no(bodies.held)
    torque = drive_torque_N_m(bodies, brakes, state, 0.0 * state.t_s)
    foot = _stand(bodies, state, way, rub)
    hinged = forces.stick(bodies, foot, torque, state.angle_rad, state.rate_rad_s)
    slips = ops.absolute(hinged.friction_N) > bodies.friction * hinged.normal_N
    begins = ops.choose(slips, ops.choose(hinged.friction_N > 0.0, -1, 1), 0)
    way = ops.choose(state.slide_m_s != 0.0, ops.sign(state.slide_m_s), begins)
    way = ops.choose(bodies.held, 0, way)
    foot = _stand(bodies, state, way, rub)
    pull = forces.slide(bodies, foot, torque, state.angle_rad, state.rate_rad_s)
    return foot, ops.no(bodies.held) & (way != 0) & (pull.normal_N <= 0.0)


def _margin(step: _Step, start: _Swing, end: _Swing, t_s: Floats) -> Floats:
    """How far an end of a step is from the first event: positive before it, negative after.

    Asked at the end's own angle and wheel speed: a step may cross a turning point and an end
    angle together, and then neither angle alone tells which came first. Where a step could touch a
    face and be back before its end, its turning point counts as an event.
    """
    bodies, state, foot = step.bodies, step.state, step.foot
    ops = bodies.ops
    low, high = state.low * QUARTER, state.high * QUARTER
    margin = ops.minimum(end.angle_rad - low, high - end.angle_rad)
    furthest = start.angle_rad + start.rate_rad_s * t_s
    touches = (furthest > high) | (furthest < low)
    onward = end.rate_rad_s * ops.sign(start.rate_rad_s)
    margin = ops.where(touches, ops.minimum(margin, onward), margin)
    if ops.some(state.slipping):
        left = wheel_after(bodies, step.brakes, state, t_s) - end.rate_rad_s
        left = left / ops.maximum(state.start_rad_s, 1.0)
        margin = ops.minimum(margin, ops.where(state.slipping, left, _NEVER))
    if ops.some(foot.rub):
        turning = (foot.rub != 0) & (start.rate_rad_s != 0.0)
        margin = ops.minimum(margin, ops.where(turning, end.rate_rad_s * foot.rub, _NEVER))
    return margin if step.all_held else ops.minimum(margin, _grip(step, start, end, t_s))


def _grip(step: _Step, start: _Swing, end: _Swing, t_s: Floats) -> Floats:
    """The same for what only a free corner does: to stop, to begin to slide, to leave."""
    bodies, state, foot = step.bodies, step.state, step.foot
    torque = drive_torque_N_m(bodies, step.brakes, state, t_s)
    pull = forces.slide(bodies, foot, torque, end.angle_rad, end.rate_rad_s)
    ops, sliding = bodies.ops, foot.way != 0
    holding = bodies.friction * pull.normal_N - ops.absolute(pull.friction_N)
    weight = bodies.mass_kg * ops.maximum(bodies.gravity_m_s2, 1.0)
    spare = ops.where(sliding, pull.normal_N, holding) / weight
    moving = sliding & (start.slide_m_s != 0.0)
    grip = ops.minimum(spare, ops.where(moving, end.slide_m_s * foot.way, _NEVER))
    return ops.where(bodies.held, _NEVER, grip)


def _take_off(bodies: Bodies, state: State, flies: Bools) -> None:
    ops = bodies.ops
    rx, rz = turned(ops, standing_arm_m(bodies, state.corner), state.angle_rad)
    forward = state.slide_m_s + state.rate_rad_s * rz
    state.phase = ops.choose(flies, int(Phase.FLIGHT), state.phase)
    state.height_m = ops.where(flies, rz, state.height_m)
    state.vx_m_s = ops.where(flies, forward, state.vx_m_s)
    state.vz_m_s = ops.where(flies, -state.rate_rad_s * rx, state.vz_m_s)
    first = flies & (state.lift_rad_s == 0.0)
    state.lift_rad_s = ops.where(first, state.rate_rad_s, state.lift_rad_s)


def _follow(step: _Step, start: _Swing, step_s: Floats) -> _Swing:
    """One step. While a corner sticks, its body's acceleration hangs on the angle alone."""
    ops, slides = step.bodies.ops, step.foot.way != 0
    if not step.foot.slides:
        return _nystroem(step, start, step_s)
    sliding = _runge_kutta(step, start, step_s)
    if ops.every(slides):
        return sliding
    sticking = _nystroem(step, start, step_s)
    return _Swing(*(ops.where(slides, a, b) for a, b in zip(sliding, sticking, strict=True)))


def _nystroem(step: _Step, start: _Swing, step_s: Floats) -> _Swing:
    """One step of Nystroem's method (1925) of fifth order for theta'' = f(t, theta): as many
    accelerations as the classical fourth-order one, and steps twice as long for the same error."""
    h, square = step_s, step_s * step_s
    angle, rate = start.angle_rad, start.rate_rad_s
    torque, bodies, foot = _torques(step, h), step.bodies, step.foot
    k1 = forces.hinged_rad_s2(bodies, foot, torque(0.0), angle)
    k2 = forces.hinged_rad_s2(
        bodies, foot, torque(0.2), angle + 0.2 * h * rate + square / 50.0 * k1
    )
    third = angle + h * rate / 1.5 + square / 27.0 * (7.0 * k2 - k1)
    k3 = forces.hinged_rad_s2(bodies, foot, torque(1.0 / 1.5), third)
    last = angle + h * rate + square / 70.0 * (21.0 * k1 - 4.0 * k2 + 18.0 * k3)
    k4 = forces.hinged_rad_s2(bodies, foot, torque(1.0), last)
    swept = square / 336.0 * (14.0 * k1 + 100.0 * k2 + 54.0 * k3)
    gained = h / 336.0 * (14.0 * k1 + 125.0 * k2 + 162.0 * k3 + 35.0 * k4)
    return _Swing(angle + h * rate + swept, rate + gained, start.slide_m_s)


def _torques(step: _Step, step_s: Floats) -> Callable[[float], Floats]:
    """The brakes' torques at a part of a step."""
    bodies, brakes, state = step.bodies, step.brakes, step.state
    if brakes.steady:
        constant = drive_torque_N_m(bodies, brakes, state, 0.0 * step_s)
        return lambda part: constant
    return lambda part: drive_torque_N_m(bodies, brakes, state, part * step_s)


def _runge_kutta(step: _Step, start: _Swing, step_s: Floats) -> _Swing:
    """One classical fourth-order step, for corners of which some slide."""
    half_s, torque = 0.5 * step_s, _torques(step, step_s)
    first, middle, last = torque(0.0), torque(0.5), torque(1.0)
    angle, rate = start.angle_rad, start.rate_rad_s
    a1, s1 = _pull(step, first, angle, rate)
    r2 = rate + half_s * a1
    a2, s2 = _pull(step, middle, angle + half_s * rate, r2)
    r3 = rate + half_s * a2
    a3, s3 = _pull(step, middle, angle + half_s * r2, r3)
    r4 = rate + step_s * a3
    a4, s4 = _pull(step, last, angle + step_s * r3, r4)
    sixth_s = step_s / 6.0
    end_angle = angle + sixth_s * (rate + 2.0 * (r2 + r3) + r4)
    end_rate = rate + sixth_s * (a1 + 2.0 * (a2 + a3) + a4)
    end_slide = start.slide_m_s + sixth_s * (s1 + 2.0 * (s2 + s3) + s4)
    return _Swing(end_angle, end_rate, end_slide)


def _pull(
    step: _Step, torque_N_m: Floats, angle_rad: Floats, rate_rad_s: Floats
) -> tuple[Floats, Floats | float]:
    if not step.foot.slides:
        return forces.hinged_rad_s2(step.bodies, step.foot, torque_N_m, angle_rad), 0.0
    pull = forces.slide(step.bodies, step.foot, torque_N_m, angle_rad, rate_rad_s)
    return pull.angular_rad_s2, pull.slide_m_s2
