"""State of a body and its wheel during one motion, and the facts that come out of it.

Owns the words for a motion (phases, moments, result) and what every phase needs: the wheel's
slowing, the lock, the peaks, the search for an event's time. Knows no forces (contact.py).
Times count from the brake's command; angles and rates are positive in the ordered sense.
"""

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum
from typing import Final, NamedTuple

from sim_link.contact import Body

_HALVINGS: Final = 45


class Phase(StrEnum):
    """How the body stands at a moment."""

    CORNER = "on a corner"
    FLIGHT = "in flight"
    FLAT = "flat on a face"


class Moment(NamedTuple):
    """Body and wheel at one time. SI units, radians; ``height_m`` is the centre of mass above
    the floor, velocities are its own, ``slipping`` says that the wheel is not locked yet."""

    t_s: float
    phase: Phase
    angle_rad: float
    rate_rad_s: float
    wheel_rad_s: float
    height_m: float
    vx_m_s: float
    vz_m_s: float
    slipping: bool


Watch = Callable[[Moment], None]


@dataclass(frozen=True, slots=True)
class MotionResult:
    """Facts of one motion. ``faces`` may be 2 or more; ``turned_rad`` is the body's angle at
    the end, ``brake_s`` runs from the brake's command (its onset included) to the lock,
    ``settle_s`` from the brake's command to rest."""

    faces: int
    turned_rad: float
    peak_tilt_rad: float
    peak_rate_rad_s: float
    brake_s: float
    settle_s: float
    settled: bool


@dataclass(slots=True)
class State:
    """What changes during a motion. ``corner`` is the one it stands on or last stood on,
    ``face`` the one it last lay on, ``slide_m_s`` the corner's forward speed; height
    and velocities hold in flight only."""

    t_s: float
    wheel_rad_s: float
    slipping: bool = True
    phase: Phase = Phase.CORNER
    corner: int = 0
    face: int = 0
    angle_rad: float = 0.0
    rate_rad_s: float = 0.0
    slide_m_s: float = 0.0
    height_m: float = 0.0
    vx_m_s: float = 0.0
    vz_m_s: float = 0.0
    brake_s: float = 0.0
    peak_tilt_rad: float = 0.0
    peak_rate_rad_s: float = 0.0


def wheel_after(body: Body, state: State, t_s: float) -> float:
    """Wheel speed after braking on for a time: Iw w' = -tau, rad/s."""
    return state.wheel_rad_s - body.brake_torque_N_m * t_s / body.wheel_inertia_kg_m2


def lock(state: State) -> None:
    """The wheel turns with the body from now on."""
    state.slipping, state.wheel_rad_s, state.brake_s = False, state.rate_rad_s, state.t_s


def advance(state: State, step_s: float, angle_rad: float, rate_rad_s: float) -> None:
    """Take over a step's end and keep the peaks; asked before any landing changes the rate."""
    state.t_s += step_s
    state.angle_rad, state.rate_rad_s = angle_rad, rate_rad_s
    state.peak_tilt_rad = max(state.peak_tilt_rad, abs(angle_rad))
    state.peak_rate_rad_s = max(state.peak_rate_rad_s, abs(rate_rad_s))


def first_time(event: Callable[[float], bool], late_s: float) -> float:
    """Time within a step at which an event begins to hold, by halving; not so at zero."""
    early_s = 0.0
    for _ in range(_HALVINGS):
        middle_s = (early_s + late_s) / 2
        if event(middle_s):
            late_s = middle_s
        else:
            early_s = middle_s
    return late_s
