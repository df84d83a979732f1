"""The phase on a corner: the body turns about it, sticking or sliding, until something ends it.

Owns the steps of this phase and its events: a face comes down, the wheel locks, the corner
begins or ceases to slide, the body leaves the floor. Forces are contact.py's.
"""

import math

from sim_link import contact
from sim_link.contact import QUARTER, Body, Footing
from sim_link.landing import come_down
from sim_link.motion import Phase, State, advance, first_time, lock, wheel_after

_Swing = tuple[float, float, float]
"""(angle rad, rate rad/s, slide m/s)"""


def corner_step(body: Body, state: State, step_s: float) -> None:
    """Advance by at most a step on the standing corner; stop at the first event within it."""
    footing = _footing(body, state)
    if footing is None:
        _take_off(body, state)
        return
    start = (state.angle_rad, state.rate_rad_s, state.slide_m_s)
    end = _runge_kutta(body, footing, start, step_s)
    if _event(body, state, footing, end, step_s):

        def happened(t_s: float) -> bool:
            return _event(body, state, footing, _runge_kutta(body, footing, start, t_s), t_s)

        step_s = first_time(happened, step_s)
        end = _runge_kutta(body, footing, start, step_s)
    wheel = wheel_after(body, state, step_s) if state.slipping else end[1]
    advance(state, step_s, end[0], end[1])
    state.slide_m_s = end[2] if end[2] * footing.way > 0.0 else 0.0
    if state.slipping and wheel <= state.rate_rad_s:
        lock(state)
    else:
        state.wheel_rad_s = wheel
    if _off_corner(state.corner, state.angle_rad):
        come_down(body, state)


def _event(body: Body, state: State, footing: Footing, end: _Swing, t_s: float) -> bool:
    """Whether, by this end of a step, a face has come down, the wheel has locked, or a
    sliding corner has come to a stop or needs the floor to pull.

    Asked at the end's own angle and wheel speed: a step may cross a turning point and an end
    angle together, and then neither angle alone tells which came first.
    """
    locked = state.slipping and wheel_after(body, state, t_s) <= end[1]
    stopped = end[2] * state.slide_m_s < 0.0
    lifted = footing.way != 0 and contact.slide(body, footing, end[0], end[1]).normal_N < 0.0
    return locked or stopped or lifted or _off_corner(state.corner, end[0])


def _off_corner(corner: int, angle_rad: float) -> bool:
    return not corner * QUARTER <= angle_rad <= (corner + 1) * QUARTER


def _footing(body: Body, state: State) -> Footing | None:
    """How the corner stands: sticking, sliding one way, or not at all (None).

    A held corner sticks and never leaves. A free one slides on while it moves, begins to
    slide where sticking would need more friction than there is (|F| > mu N), and leaves
    where the floor would have to pull.
    """
    drive = contact.push(body, state.slipping)
    sticking = Footing(state.corner, state.face, drive)
    if body.held:
        return sticking
    way = int(math.copysign(1, state.slide_m_s)) if state.slide_m_s else 0
    if not way:
        hinged = contact.stick(body, sticking, state.angle_rad, state.rate_rad_s)
        if abs(hinged.friction_N) <= body.friction * hinged.normal_N:
            return sticking
        way = -1 if hinged.friction_N > 0.0 else 1
    sliding = Footing(state.corner, state.face, drive, way)
    pull = contact.slide(body, sliding, state.angle_rad, state.rate_rad_s)
    return sliding if pull.normal_N > 0.0 else None


def _take_off(body: Body, state: State) -> None:
    rx, rz = contact.arm_m(body, state.corner, state.angle_rad)
    state.phase = Phase.FLIGHT
    state.height_m = rz
    state.vx_m_s = state.slide_m_s + state.rate_rad_s * rz
    state.vz_m_s = -state.rate_rad_s * rx


def _runge_kutta(body: Body, footing: Footing, start: _Swing, step_s: float) -> _Swing:
    """One classical fourth-order step."""
    pull = contact.slide if footing.way else contact.stick
    angle, rate, sliding = start
    half = step_s / 2
    a1, u1, _, _ = pull(body, footing, angle, rate)
    r2 = rate + half * a1
    a2, u2, _, _ = pull(body, footing, angle + half * rate, r2)
    r3 = rate + half * a2
    a3, u3, _, _ = pull(body, footing, angle + half * r2, r3)
    r4 = rate + step_s * a3
    a4, u4, _, _ = pull(body, footing, angle + step_s * r3, r4)
    sixth = step_s / 6
    return (
        angle + sixth * (rate + 2 * r2 + 2 * r3 + r4),
        rate + sixth * (a1 + 2 * a2 + 2 * a3 + a4),
        sliding + sixth * (u1 + 2 * u2 + 2 * u3 + u4),
    )
