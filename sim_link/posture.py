"""How one module lies and moves: the truth that its firmware only measures.

Owns the posture (which face is up), the module's own deviation from its kind, and what a brake
or a motor's torque does to the body. Knows nothing of firmware, messages or measuring errors.
Forward is the positive sense: it turns face 1 up into face 2 up, and 4 into 1.
"""

import math
from dataclasses import replace
from typing import Final, NamedTuple

from sim_link import mechanics
from sim_link.deed import Deed, setting_of
from sim_link.fleet_file import ModuleSpec
from sim_link.kinds import Kind
from sim_link.mechanics import MotionResult, Watch
from sim_link.options import FaultKind
from sim_link.randomness import Draws

RIGHTED_AFTER_NS: Final = 20_000_000_000
"""A module that came to rest on no face is set on its nearest one by a person of the hall."""

_SPREAD: Final = 0.01
"""Standard deviation of a module's wheel inertia, brake torque and mass about its kind's."""
_BRAKE_NOISE: Final = 0.015
_SPEED_NOISE: Final = 0.015
"""Standard deviations from one motion to the next; the wheel's speed stands for all that
changes what of its momentum arrives."""
_WEAK_BRAKE: Final = 0.55
_IN_HAND_RAD: Final = 0.4
"""How far a person who holds a module tilts it, about."""
_TIP_NS: Final = 300_000_000
"""About how long a tipped module takes to fall on its next face."""
_TURN_RAD: Final = math.pi / 2
_LEVEL: Final = (1, 2, 3, 4)
"""Faces with the wheel axis level. With the axis upright a body lies on 5 or 6 and stays there."""


class Posture(NamedTuple):
    """Which face is up (0: none), the tilt from it in radians, forward positive, and whether
    the module lies still."""

    face_up: int
    tilt_rad: float
    settled: bool


class _Movement(NamedTuple):
    """One movement of the body: from face to face, by way of its largest tilt. ``faces`` and
    angles are positive forward."""

    start_ns: int
    end_ns: int
    faces: int
    peak_tilt_rad: float
    turned_rad: float
    settled: bool


class Braking(NamedTuple):
    """What a brake was applied to, with this motion's luck in it: enough to compute the motion
    again, moment by moment, where somebody asks for its trace."""

    kind: Kind
    wheel_rad_s: float
    face_up: int
    direction: int
    deed: Deed = Deed.FLOOR

    def again(self, watch: Watch | None = None) -> MotionResult:
        """Compute what comes of it."""
        if self.deed is Deed.TWIST:
            return mechanics.twist(self.kind, self.wheel_rad_s, watch)
        face_up = self.face_up if self.face_up in _LEVEL else _LEVEL[0]
        setting = setting_of(self.deed)
        return mechanics.pivot(
            self.kind, self.wheel_rad_s, face_up, self.direction, setting=setting, watch=watch
        )


def turned_face(face_up: int, faces: int) -> int:
    """Return the face that is up after so many faces forward; with the axis upright it stays."""
    if face_up not in _LEVEL:
        return face_up
    return (face_up - 1 + faces) % 4 + 1


def own_kind(spec: ModuleSpec, draws: Draws) -> Kind:
    """Return the kind as this module really is: a fixed draw, and its fault if it has one."""
    weak = _WEAK_BRAKE if FaultKind.WEAK_BRAKE in spec.faults else 1.0
    kind = spec.kind

    def about(value: float, what: str) -> float:
        return value * (1.0 + _SPREAD * draws.normal(0, "own " + what))

    return replace(
        kind,
        wheel_inertia_kg_m2=about(kind.wheel_inertia_kg_m2, "wheel inertia"),
        brake_torque_N_m=about(kind.brake_torque_N_m, "brake torque") * weak,
        mass_kg=about(kind.mass_kg, "mass"),
    )


class VirtualBody:
    """The body of one module: moved by its brake, and by a motor that pulls too hard."""

    def __init__(self, spec: ModuleSpec, draws: Draws) -> None:
        self.kind = own_kind(spec, draws)
        self.turned_rad = 0.0
        """Angle turned since the start, forward positive: what a gyroscope would add up."""
        self.braking: Braking | None = None
        """The last brake that was applied."""
        self._draws = draws
        weak = FaultKind.WEAK_BRAKE in spec.faults
        self._sound_brake_N_m = self.kind.brake_torque_N_m / (_WEAK_BRAKE if weak else 1.0)
        self._face_up = spec.face_up
        self._lifted = False
        self._movement: _Movement | None = None

    def posture(self, t_ns: int) -> Posture:
        """Return how the module lies at ``t_ns``."""
        movement = self._movement
        if self._lifted:
            return Posture(0, _IN_HAND_RAD, False)
        if movement is None:
            return Posture(self._face_up, 0.0, True)
        if self._face_up not in _LEVEL:  # it turns on its face, and gravity shows nothing of it
            return Posture(self._face_up, 0.0, t_ns >= movement.end_ns)
        if t_ns < movement.end_ns:
            return Posture(0, _tilt_on_the_way(movement, t_ns), False)
        after = turned_face(self._face_up, movement.faces)
        if movement.settled or t_ns >= movement.end_ns + RIGHTED_AFTER_NS:
            return Posture(after, 0.0, True)
        return Posture(0, movement.turned_rad - movement.faces * _TURN_RAD, False)

    def brake(
        self, wheel_rad_s: float, direction: int, count: int, t_ns: int, deed: Deed = Deed.FLOOR
    ) -> MotionResult:
        """Apply the brake at this wheel speed; return what comes of it, in the ordered sense.

        ``count`` is the module's count of motions: the key of this motion's luck.
        """
        self._finish(t_ns)
        speed = 1.0 + _SPEED_NOISE * self._draws.normal(count, "speed")
        torque = 1.0 + _BRAKE_NOISE * self._draws.normal(count, "brake")
        kind = replace(self.kind, brake_torque_N_m=self.kind.brake_torque_N_m * torque)
        self.braking = Braking(kind, abs(wheel_rad_s) * speed, self._face_up, direction, deed)
        result = self.braking.again()
        self._move(
            _Movement(
                t_ns,
                t_ns + int(result.settle_s * 1e9),
                direction * result.faces,
                direction * result.peak_tilt_rad,
                direction * result.turned_rad,
                result.settled,
            )
        )
        return result

    def weaken(self, weak: bool) -> None:
        """Let the brake have a part of its torque only, or all of it again."""
        torque_N_m = self._sound_brake_N_m * (_WEAK_BRAKE if weak else 1.0)
        self.kind = replace(self.kind, brake_torque_N_m=torque_N_m)

    def lift(self, lifted: bool, t_ns: int) -> None:
        """A person takes it in the hand, or sets it down again, on the next face forward."""
        if self._lifted and not lifted:
            self._finish(t_ns)
            self._face_up = turned_face(self._face_up, 1)
            self.turned_rad += _TURN_RAD
        self._lifted = lifted

    def push(self, torque_N_m: float, sense: int, t_ns: int, until_ns: int) -> None:
        """Let the motor's reaction act on the body from ``t_ns`` to ``until_ns``.

        Nothing happens below the torque that tips this module in this posture and sense; above
        it the module rolls over its edge (with the axis upright: slews round), whatever its
        firmware believed.
        """
        self._finish(t_ns)
        limit_N_m = mechanics.tipping_torque_N_m(self.kind, self._face_up, sense)
        if torque_N_m > limit_N_m:
            angle_rad = sense * _TURN_RAD
            end_ns = max(until_ns, t_ns + _TIP_NS)
            self._move(_Movement(t_ns, end_ns, sense, angle_rad, angle_rad, True))

    def _move(self, movement: _Movement) -> None:
        self._movement = movement
        self.turned_rad += movement.turned_rad

    def _finish(self, t_ns: int) -> None:
        """Make the last movement's end the posture from which the next one starts."""
        if self._movement is not None:
            self._face_up = turned_face(self._face_up, self._movement.faces)
            self._movement = None


def _tilt_on_the_way(movement: _Movement, t_ns: int) -> float:
    """Straight to the largest tilt and straight back to the end: a picture for telemetry, no
    integration; the figures of a motion come from its result."""
    part = (t_ns - movement.start_ns) / max(movement.end_ns - movement.start_ns, 1)
    if part < 0.5:
        return 2.0 * part * movement.peak_tilt_rad
    back = movement.turned_rad - movement.peak_tilt_rad
    return movement.peak_tilt_rad + (2.0 * part - 1.0) * back
