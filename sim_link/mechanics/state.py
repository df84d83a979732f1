"""State of bodies and their wheels during motions, and the facts that come out of them.

Owns the words for a motion (phases, moments, result) and what every phase needs: the brake's
torque at a time, the wheel's slowing, the lock, the peaks. Knows no forces (forces.py). Times
count from the brake's command; angles and rates are positive in the ordered sense.
"""

from collections.abc import Callable
from dataclasses import dataclass, fields
from enum import IntEnum
from typing import Any, NamedTuple

from sim_link.mechanics import brake
from sim_link.mechanics.arrays import Bools, Floats, Ints, Ops
from sim_link.mechanics.bodies import Arcs, Bodies


class Phase(IntEnum):
    """How a body stands at a moment."""

    CORNER = 0
    FLIGHT = 1
    FLAT = 2
    """At rest, on a face; in the setting flat, wherever its drag has stopped it."""


class Moment(NamedTuple):
    """Body and wheel at one time. SI units, radians; ``height_m`` is the centre of mass above
    the corner it stands on (in flight: above the floor), velocities are its own, ``slipping`` says
    that the wheel is not locked yet."""

    t_s: float
    phase: Phase
    angle_rad: float
    rate_rad_s: float
    wheel_rad_s: float
    height_m: float
    vx_m_s: float
    vz_m_s: float
    slipping: bool


@dataclass(frozen=True, slots=True)
class MotionResult:
    """Facts of one motion. ``faces`` may be 2 or more; ``turned_rad`` is the body's angle at
    the end, ``brake_s`` runs from the brake's command (its onset included) to the lock,
    ``settle_s`` from the brake's command to rest, ``lock_rad`` is the angle at the lock.
    ``lift_rad_s`` is the body's rate at its first lift-off and ``rise_m`` how far its centre of
    mass rose above its place of rest in flight; both 0 where it did not leave the floor."""

    faces: int
    turned_rad: float
    peak_tilt_rad: float
    peak_rate_rad_s: float
    brake_s: float
    settle_s: float
    settled: bool
    lock_rad: float = 0.0
    lift_rad_s: float = 0.0
    rise_m: float = 0.0


@dataclass(slots=True)
class State:
    """What changes during motions, one element a body. Fields are replaced, never changed in place.

    ``low``, ``high`` and ``corner`` are the arc it turns through (bodies.Arcs), ``face`` the one
    it last lay on, ``slide_m_s`` the corner's forward speed, ``rub`` the way in which its face
    rubs; height and velocities hold in flight only.
    """

    t_s: Floats
    wheel_rad_s: Floats
    start_rad_s: Floats
    """The wheel's speed when the brake was applied."""
    slipping: Bools
    phase: Ints
    low: Ints
    high: Ints
    corner: Ints
    face: Ints
    angle_rad: Floats
    rate_rad_s: Floats
    slide_m_s: Floats
    rub: Ints
    height_m: Floats
    vx_m_s: Floats
    vz_m_s: Floats
    brake_s: Floats
    lock_rad: Floats
    peak_tilt_rad: Floats
    peak_rate_rad_s: Floats
    lift_rad_s: Floats
    apex_m: Floats

    @classmethod
    def before(cls, bodies: Bodies, wheel_rad_s: Floats) -> "State":
        """Bodies that lie on their first face, at their brakes' onset."""
        nothing: Any = 0.0 * wheel_rad_s
        nowhere: Any = bodies.ops.floor(nothing)
        state = cls(*(nowhere if field.type == Ints else nothing for field in fields(cls)))
        state.slipping = wheel_rad_s >= 0.0
        state.t_s = bodies.brake_onset_s
        state.wheel_rad_s = state.start_rad_s = wheel_rad_s
        return state

    def take(self, places: Ints) -> "State":
        """A copy of some of them."""
        return State(*(getattr(self, name)[places] for name in _NAMES))

    def put(self, places: Ints, part: "State") -> None:
        """Take over what became of some of them."""
        for name in _NAMES:
            whole = getattr(self, name).copy()
            whole[places] = getattr(part, name)
            setattr(self, name, whole)

    def turn_through(self, ops: Ops, where: Bools, arcs: Arcs) -> None:
        """Go on through other arcs, those of ``where``."""
        self.low = ops.choose(where, arcs.low, self.low)
        self.high = ops.choose(where, arcs.high, self.high)
        self.corner = ops.choose(where, arcs.corner, self.corner)


_NAMES = tuple(field.name for field in fields(State))
Watch = Callable[[Moment], None]


def drive_torque_N_m(bodies: Bodies, brakes: brake.Brakes, state: State, ahead_s: Floats) -> Floats:
    """Torque of the brakes on the bodies so long from now; none on those whose wheel is locked."""
    torque = brake.torque_N_m(brakes, state.t_s + ahead_s - brakes.onset_s)
    return bodies.ops.where(state.slipping, torque, 0.0)


def turning_inertia_kg_m2(bodies: Bodies, state: State) -> Floats:
    """What turns with the body about its centre of mass: all but a wheel that slips."""
    return bodies.inertia_kg_m2 - bodies.ops.where(state.slipping, bodies.wheel_inertia_kg_m2, 0.0)


def wheel_after(bodies: Bodies, brakes: brake.Brakes, state: State, ahead_s: Floats) -> Floats:
    """Speed of wheels that slip, so long from now: Iw w' = -tau, from the start on."""
    since = state.t_s + ahead_s - brakes.onset_s
    return state.start_rad_s - brake.impulse_N_m_s(brakes, since) / bodies.wheel_inertia_kg_m2


def lock(ops: Ops, state: State, where: Bools) -> None:
    """These wheels turn with their bodies from now on."""
    state.slipping = state.slipping & ops.no(where)
    state.wheel_rad_s = ops.where(where, state.rate_rad_s, state.wheel_rad_s)
    state.brake_s = ops.where(where, state.t_s, state.brake_s)
    state.lock_rad = ops.where(where, state.angle_rad, state.lock_rad)


def advance(ops: Ops, state: State, step_s: Floats, angle_rad: Floats, rate_rad_s: Floats) -> None:
    """Take over a step's end and keep the peaks; asked before any landing changes the rate."""
    state.t_s = state.t_s + step_s
    state.angle_rad, state.rate_rad_s = angle_rad, rate_rad_s
    state.peak_tilt_rad = ops.maximum(state.peak_tilt_rad, ops.absolute(angle_rad))
    state.peak_rate_rad_s = ops.maximum(state.peak_rate_rad_s, ops.absolute(rate_rad_s))
