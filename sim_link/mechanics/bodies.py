"""Bodies about to move: what of a kind a motion needs, one element a module.

Owns attempts (a kind, how it lies, what it is asked for), the bodies made of them, and the
geometry of hinge edges in the four settings. Knows no forces (forces.py) and no sequence of events
(tumble.py).

Plane of the motion: x forward, z up; angles and rates forward (clockwise seen with x to the
right), counted from the face the body started on. Corner n is the one about which the body turns
on the floor from its nth face on to the next. An arm leads from a corner to the centre of mass.
A body turns through an arc: about one corner, from one face that it can lie on to another, both
counted in quarter turns.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any, Final, NamedTuple

import numpy as np

from protocol.codes import Setting
from sim_link.kinds import Kind, centre_inertia_kg_m2, offset_m
from sim_link.mechanics.arrays import ARRAYS, PLAIN, Bools, Floats, Ints, Ops
from sim_link.mechanics.brake import Brakes
from sim_link.mechanics.hold import GRAVITY_M_S2, face_drag_N_m, holding_magnet_N_m

QUARTER: Final = math.pi / 2
_CORNER_SIGNS: Final = ((1, -1), (1, 1), (-1, 1), (-1, -1))
_CREST_TOP: Final = 2


class Attempt(NamedTuple):
    """One motion about to be tried: of what kind a module is, and how it lies. ``wheel_rad_s``
    is the speed in the ordered sense, zero or more."""

    kind: Kind
    wheel_rad_s: float
    face_up: int = 1
    sense: int = 1
    setting: Setting = Setting.FLOOR


@dataclass(frozen=True, slots=True)
class Bodies:
    """What of their kinds the motions need, the ordered sense made forward. One element each."""

    ops: Ops
    side_m: Floats
    mass_kg: Floats
    inertia_kg_m2: Floats
    """Ic, wheel locked, about the centre of mass."""
    wheel_inertia_kg_m2: Floats
    brake_torque_N_m: Floats
    brake_onset_s: Floats
    brake_kept: Floats
    brake_decay_s: Floats
    arm_x_m: Floats
    """From corners 0 to 3 to the centre of mass, forward, at angle zero; shape (n, 4)."""
    arm_z_m: Floats
    held: Bools
    magnet_torque_N_m: Floats
    magnet_angle_rad: Floats
    drag_N_m: Floats
    friction: Floats
    restitution: Floats
    gravity_m_s2: Floats
    """In the plane of the motion: zero in the setting flat."""
    hanging: Bools
    """It turns about the upper edge that it shares with a neighbour."""
    crest: Bools

    @property
    def brakes(self) -> Brakes:
        """Their brakes."""
        steady = self.ops.every(self.brake_kept >= 1.0)
        parts = self.brake_torque_N_m, self.brake_onset_s, self.brake_kept, self.brake_decay_s
        return Brakes(*parts, self.ops, steady)

    def take(self, places: Ints) -> "Bodies":
        """Some of them, by place."""
        return Bodies(self.ops, *(getattr(self, name)[places] for name in _NAMES))


_NAMES = tuple(field.name for field in fields(Bodies))[1:]


def bodies_of(attempts: Sequence[Attempt]) -> Bodies:
    """Set modules up for their motions: one with plain numbers, several with arrays."""
    rows = [_row(attempt) for attempt in attempts]
    if len(rows) == 1:
        return Bodies(PLAIN, *rows[0])
    return Bodies(ARRAYS, *(np.array(column) for column in zip(*rows, strict=True)))


def _row(attempt: Attempt) -> tuple[Any, ...]:
    """The fields of one body, in the order of Bodies."""
    kind = attempt.kind
    away, up = offset_m(kind, attempt.face_up, attempt.sense)
    half = kind.side_m / 2
    return (
        kind.side_m,
        kind.mass_kg,
        centre_inertia_kg_m2(kind),
        kind.wheel_inertia_kg_m2,
        kind.brake_torque_N_m,
        kind.brake_onset_s,
        kind.brake_kept,
        kind.brake_decay_s,
        [-(away + i * half) for i, _ in _CORNER_SIGNS],
        [up - k * half for _, k in _CORNER_SIGNS],
        kind.held,
        holding_magnet_N_m(kind),
        kind.magnet_angle_rad,
        face_drag_N_m(kind) if attempt.setting is Setting.FLAT else 0.0,
        kind.floor_friction,
        kind.restitution,
        0.0 if attempt.setting is Setting.FLAT else GRAVITY_M_S2,
        attempt.setting in (Setting.WALL, Setting.CREST),
        attempt.setting is Setting.CREST,
    )


class Arcs(NamedTuple):
    """Between which faces bodies turn, in quarter turns, and about which corner (0 to 3)."""

    low: Ints
    high: Ints
    corner: Ints


def arcs_forward(bodies: Bodies, face: Ints) -> Arcs:
    """The arcs that begin at these faces, forward.

    On the floor corner n leads from face n to the next. On a wall it is the corner above,
    which is numbered one more. Over a crest that one leads through two faces, and from the top on
    it is as on the floor.
    """
    over = bodies.crest & (face == 0)
    beside = bodies.hanging & bodies.ops.no(bodies.crest & (face >= _CREST_TOP))
    return Arcs(face, face + 1 + over, (face + beside) % 4)


def arcs_back(bodies: Bodies, face: Ints) -> Arcs:
    """The arcs that end at these faces: where a body goes on that turned back past one."""
    over = bodies.crest & (face == _CREST_TOP)
    low = face - 1 - over
    beside = bodies.hanging & bodies.ops.no(bodies.crest & (low >= _CREST_TOP))
    return Arcs(low, face, (low + beside) % 4)


def standing_arm_m(bodies: Bodies, corner: Ints) -> tuple[Floats, Floats]:
    """From these corners to the centre of mass, (forward, up), at angle zero."""
    pick = bodies.ops.pick
    return pick(bodies.arm_x_m, corner), pick(bodies.arm_z_m, corner)


def turned(ops: Ops, arm: tuple[Floats, Floats], angle_rad: Floats) -> tuple[Floats, Floats]:
    """An arm, (forward, up), as it stands once the body has turned by an angle."""
    x, z = arm
    cosine, sine = ops.cos(angle_rad), ops.sin(angle_rad)
    return x * cosine + z * sine, z * cosine - x * sine


def lowest_corner(ops: Ops, angle_rad: Floats) -> Ints:
    """Number of the corner nearest the floor at these angles, in quarter turns (not modulo 4)."""
    return ops.floor(angle_rad / QUARTER)
