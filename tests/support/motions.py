"""Ways to ask the mechanics for a motion that tests of it share: followed, in another posture.

Knows no figure: those stand in the tests, with their origin.
"""

import math
from dataclasses import replace
from typing import Any

from protocol.codes import Setting
from sim_link.kinds import Kind, centre_inertia_kg_m2
from sim_link.mechanics import GRAVITY_M_S2, Moment, pivot
from tests.support.kinds import kind_with

FACE = {Setting.FLOOR: 1, Setting.WALL: 4, Setting.CREST: 4, Setting.FLAT: 1}
"""The face up from which a pivot forward turns about the edge that faces 1 and 2 share with the
floor: on a wall and over a crest that edge is the upper one of a module with face 4 up."""
SETTINGS = tuple(FACE)


def cube(side: float, mass: float, wheel: float, brake: float, **more: Any) -> Kind:
    """A uniform cube: side m, mass kg, wheel inertia kg m^2, brake torque N m."""
    return kind_with(
        side_m=side, mass_kg=mass, wheel_inertia_kg_m2=wheel, brake_torque_N_m=brake, **more
    )


def changed(kind: Kind, **changes: Any) -> Kind:
    """The same kind with some fields changed."""
    return replace(kind, **changes)


def followed(
    kind: Kind, speed: float, setting: Setting = Setting.FLOOR, sense: int = 1
) -> list[Moment]:
    """Every moment of a motion, about the same edge in all settings."""
    moments: list[Moment] = []
    pivot(kind, speed, FACE[setting], sense, setting=setting, watch=moments.append)
    return moments


def body_energy_J(kind: Kind, moment: Moment) -> float:
    """Kinetic and potential energy of a module, its wheel locked (its rate the body's)."""
    turning = 0.5 * centre_inertia_kg_m2(kind) * moment.rate_rad_s**2
    moving = 0.5 * kind.mass_kg * math.hypot(moment.vx_m_s, moment.vz_m_s) ** 2
    return turning + moving + kind.mass_kg * GRAVITY_M_S2 * moment.height_m


def least_speed(kind: Kind, faces: int, between: tuple[float, float], setting: Setting) -> float:
    """Where motions begin to turn so many faces: halving, between a speed that is not enough and
    one that is, to 1e-7."""
    low, high = between
    face_up = FACE[setting]
    if not _faces(kind, low, setting, face_up) < faces <= _faces(kind, high, setting, face_up):
        raise AssertionError(f"the threshold is not between {low} and {high} rad/s")
    while high - low > 1e-7 * high:
        middle = (low + high) / 2
        enough = _faces(kind, middle, setting, face_up) >= faces
        low, high = (low, middle) if enough else (middle, high)
    return high


def _faces(kind: Kind, speed: float, setting: Setting, face_up: int) -> int:
    return pivot(kind, speed, face_up, setting=setting).faces
