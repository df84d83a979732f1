"""A twist: the wheel axis upright, the body turns on the spot against the floor's friction.

Owns the yaw of a module that stands on the end of its axis, in closed form between events, and what
a twist by a given angle needs. Uniform pressure, Coulomb friction; a module that is held tears no
magnets off here: a twist is for one that stands by itself. SI units, radians.
"""

import math
from dataclasses import replace
from typing import Final, cast

from sim_link.kinds import Kind, centre_inertia_kg_m2
from sim_link.mechanics import brake
from sim_link.mechanics.arrays import Floats
from sim_link.mechanics.bodies import Attempt, bodies_of
from sim_link.mechanics.hold import CORNER_ARM_OF_SQUARE, GRAVITY_M_S2
from sim_link.mechanics.search import Threshold
from sim_link.mechanics.state import Moment, MotionResult, Phase, Watch

CENTRE_ARM_OF_SQUARE: Final = CORNER_ARM_OF_SQUARE / 2.0
"""Mean distance from a square's centre to its points, over its side: 0.3826."""
NO_YAW: Final = "the brake does not turn the body: torque is {ratio:.3f} of the friction"
NOT_FAR: Final = "the brake fades before the body has turned so far, at any speed tried"
_HALVINGS: Final = 60
_MOMENTS: Final = 40
_LIMIT: Final = 1e3


def yaw_friction_N_m(kind: Kind) -> float:
    """Torque with which the floor resists turning on the spot: mu m g a 0.3826.

    Under uniform pressure each point resists with mu p at its distance from the centre. Magnets
    and an uneven pressure are left out (from a corner it is twice that).
    """
    weight_N = kind.mass_kg * GRAVITY_M_S2
    return kind.floor_friction * weight_N * kind.side_m * CENTRE_ARM_OF_SQUARE


def twist(kind: Kind, wheel_rad_s: float, watch: Watch | None = None) -> MotionResult:
    """What braking at this speed, zero or more, does to a module on the end of its axis.

    Slipping: (Ic - Iw) theta'' = tau - tf and Iw w' = -tau until the wheel turns with the
    body, or until a fading brake lets the body stop first. Then Ic theta'' = -tf. ``watch`` is
    shown some moments of it.
    """
    course = _Course(kind, wheel_rad_s)
    lock_s, stop_s = course.lock_s(), course.stop_s
    fastest = max(course.rate_rad_s(lock_s), 0.0)
    locked = fastest > 1e-9 * wheel_rad_s
    if not locked:
        fastest = 0.0
    lock_rad = course.angle_rad(lock_s)
    slides_s = fastest * course.inertia_kg_m2 / course.friction_N_m
    brake_s = kind.brake_onset_s + (lock_s if locked else stop_s)
    if watch is not None:
        course.show(watch, lock_s, slides_s if locked else 0.0)
    return MotionResult(
        faces=0,
        turned_rad=lock_rad + 0.5 * fastest * slides_s,
        peak_tilt_rad=lock_rad + 0.5 * fastest * slides_s,
        peak_rate_rad_s=max(fastest, course.peak_rad_s(lock_s)),
        brake_s=brake_s,
        settle_s=brake_s + slides_s,
        settled=True,
        lock_rad=lock_rad,
    )


class _Course:
    """One twist: its rate and angle while the wheel slips, times since the brake's onset."""

    def __init__(self, kind: Kind, wheel_rad_s: float) -> None:
        self._bodies = bodies_of([Attempt(kind, wheel_rad_s)])
        self._brakes = self._bodies.brakes
        self._kind, self._wheel_rad_s = kind, wheel_rad_s
        self.friction_N_m = yaw_friction_N_m(kind)
        self.inertia_kg_m2 = centre_inertia_kg_m2(kind)
        self._turning_kg_m2 = self.inertia_kg_m2 - kind.wheel_inertia_kg_m2
        momentum = _alone(wheel_rad_s * kind.wheel_inertia_kg_m2)
        self.stop_s = float(brake.stopping_s(self._brakes, momentum))
        """When the wheel would stop in a body that did not turn."""

    def _impulse_N_m_s(self, since_s: float) -> float:
        return float(brake.impulse_N_m_s(self._brakes, _alone(since_s)))

    def wheel_rad_s(self, since_s: float) -> float:
        """The wheel's speed while it slips."""
        return self._wheel_rad_s - self._impulse_N_m_s(since_s) / self._kind.wheel_inertia_kg_m2

    def rate_rad_s(self, since_s: float) -> float:
        """The body's rate while the wheel slips."""
        return (self._impulse_N_m_s(since_s) - self.friction_N_m * since_s) / self._turning_kg_m2

    def angle_rad(self, since_s: float) -> float:
        """The body's angle while the wheel slips."""
        swept = float(brake.impulse_integral_N_m_s2(self._brakes, _alone(since_s)))
        return (swept - 0.5 * self.friction_N_m * since_s * since_s) / self._turning_kg_m2

    def lock_s(self) -> float:
        """When the wheel turns with the body, or the body has stopped; 0 where it never moves."""
        if self._kind.brake_torque_N_m <= self.friction_N_m:
            return 0.0
        low, high = 0.0, self.stop_s
        for _ in range(_HALVINGS):
            middle = (low + high) / 2.0
            rate = self.rate_rad_s(middle)
            low, high = (middle, high) if self.wheel_rad_s(middle) > rate > 0.0 else (low, middle)
        return high

    def peak_rad_s(self, last_s: float) -> float:
        """Greatest rate while the wheel slips: at the end, or where a fading torque falls below
        the friction."""
        kept, decay_s = self._kind.brake_kept, self._kind.brake_decay_s
        part = self.friction_N_m / self._kind.brake_torque_N_m
        if kept >= part or part >= 1.0:
            return max(self.rate_rad_s(last_s), 0.0)
        return self.rate_rad_s(min(last_s, -decay_s * math.log((part - kept) / (1.0 - kept))))

    def show(self, watch: Watch, lock_s: float, slides_s: float) -> None:
        """Moments from the brake's onset to rest."""
        onset_s = self._kind.brake_onset_s
        for part in range(_MOMENTS + 1):
            at_s = lock_s * part / _MOMENTS
            rate, angle = self.rate_rad_s(at_s), self.angle_rad(at_s)
            watch(_moment(onset_s + at_s, angle, rate, self.wheel_rad_s(at_s)))
        fastest, locked_rad = max(self.rate_rad_s(lock_s), 0.0), self.angle_rad(lock_s)
        for part in range(1, _MOMENTS + 1):
            at_s = slides_s * part / _MOMENTS
            left = 1.0 - part / _MOMENTS
            angle = locked_rad + 0.5 * fastest * at_s * (1.0 + left)
            watch(_moment(onset_s + lock_s + at_s, angle, fastest * left, fastest * left))


def _moment(t_s: float, angle_rad: float, rate_rad_s: float, wheel_rad_s: float) -> Moment:
    slipping = wheel_rad_s > rate_rad_s
    phase = Phase.CORNER if slipping or rate_rad_s > 0.0 else Phase.FLAT
    return Moment(t_s, phase, angle_rad, rate_rad_s, wheel_rad_s, 0.0, 0.0, 0.0, slipping)


def _alone(value: float) -> Floats:
    """A lone body's plain number, where types speak of arrays."""
    return cast(Floats, value)


def twist_threshold(kind: Kind, angle_rad: float = math.pi / 2) -> Threshold:
    """Least wheel speed that turns a module on the spot by an angle.

    Ideal, with an instant brake: rate Iw w / Ic, all of its energy rubbed away over the angle, so
    w = sqrt(2 Ic tf angle) / Iw. With a steady brake the angle goes with the square of the speed,
    so one motion tells; a brake that fades is searched for by halving.
    """
    friction, inertia = yaw_friction_N_m(kind), centre_inertia_kg_m2(kind)
    ideal = math.sqrt(2.0 * inertia * friction * angle_rad) / kind.wheel_inertia_kg_m2
    ratio = kind.brake_torque_N_m / friction
    none = Threshold(False, "", math.nan, ideal, None, None, ratio, ratio, math.nan, math.nan)
    if ratio <= 1.0:
        return replace(none, reason=NO_YAW.format(ratio=ratio))
    low, high = 0.5 * ideal, _LIMIT * ideal
    if twist(kind, high).turned_rad < angle_rad:
        return replace(none, reason=NOT_FAR)
    for _ in range(_HALVINGS):
        middle = math.sqrt(low * high)
        reached = twist(kind, middle).turned_rad >= angle_rad
        low, high = (low, middle) if reached else (middle, high)
    motion = twist(kind, high)
    return Threshold(
        True, "", high, ideal, None, None, ratio, ratio, motion.lock_rad, motion.brake_s
    )
