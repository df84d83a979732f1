"""Hold curves: what resists a pivot, as a torque and an energy of the body's angle.

Owns gravity's lift, the magnets' hold and the face drag about one hinge edge, for the four
settings. Knows no wheel and no brake (threshold.py). SI units, radians, angles from rest. Every
field may be a number or an array of one element a module; angles then have a further axis.
"""

import math
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from protocol.codes import Setting
from sim_link.kinds import Kind, hinge_radius_m, rest_elevation_rad
from sim_link.mechanics.arrays import Floats

GRAVITY_M_S2: Final = 9.81
CORNER_ARM_OF_SQUARE: Final = (math.sqrt(2) + math.log1p(math.sqrt(2))) / 3
"""Mean distance from a square's corner to its points, over its side: 0.7652. Under uniform
pressure this is the arm of the friction against turning about that corner."""
_HALVINGS: Final = 60
_QUARTERS: Final = {Setting.FLOOR: 1, Setting.WALL: 1, Setting.CREST: 2, Setting.FLAT: 1}
"""Quarter turns from one face that the module lies on to the next."""


@dataclass(frozen=True, slots=True)
class Hold:
    """Hold torque T(theta) = dV/dtheta about one hinge edge, theta from rest to ``end_rad``.

    V = m g r (sin phi - sin phi0) + T0 theta0 (1 - e^(-theta/theta0)) + tf theta, where
    phi = phi0 + theta. ``end_rad`` is where the motion no longer needs the wheel: the
    crown of V, or the end of the turn where V rises until there.
    """

    weight_moment_N_m: Floats | float
    """m g r; zero where gravity acts along the hinge."""
    elevation_rad: Floats | float
    end_rad: Floats | float
    magnet_torque_N_m: Floats | float = 0.0
    magnet_angle_rad: Floats | float = 0.05
    drag_N_m: Floats | float = 0.0

    def torque_N_m(self, angle_rad: Floats | float) -> Floats:
        """T: the torque that gravity, magnets and drag put up at this angle."""
        magnets = self.magnet_torque_N_m * np.exp(-angle_rad / self.magnet_angle_rad)
        weight = self.weight_moment_N_m * np.cos(self.elevation_rad + angle_rad)
        return np.asarray(weight + magnets + self.drag_N_m)

    def energy_J(self, angle_rad: Floats | float) -> Floats:
        """V: the work against that torque from rest up to this angle."""
        reach = self.magnet_angle_rad
        magnets = -self.magnet_torque_N_m * reach * np.expm1(-angle_rad / reach)
        rise = np.sin(self.elevation_rad + angle_rad) - np.sin(self.elevation_rad)
        return np.asarray(self.weight_moment_N_m * rise + magnets + self.drag_N_m * angle_rad)


def holding_magnet_N_m(kind: Kind) -> float:
    """T0 where the kind is held, else zero: a module that stands free has nothing to hold to."""
    return kind.magnet_torque_N_m if kind.held else 0.0


def face_drag_N_m(kind: Kind) -> float:
    """tf of the setting flat: 0.7652 mu m g a, under uniform pressure."""
    weight_N = kind.mass_kg * GRAVITY_M_S2
    return CORNER_ARM_OF_SQUARE * kind.face_friction * weight_N * kind.side_m


def hold_of(kind: Kind, face_up: int = 1, sense: int = 1, setting: Setting = Setting.FLOOR) -> Hold:
    """Hold of a pivot up to where it needs the wheel no longer; ``face_up`` is 1 to 4.

    From a wall the body hangs a quarter turn lower on the same edge: phi0 is less by 90 degrees.
    The offset of the centre of mass turns with the body, so the posture is that of the face which
    would be up with this edge at the floor. In ``flat`` gravity has no part, and all four are alike
    but for the offset.
    """
    if setting in (Setting.WALL, Setting.CREST):
        face_up = face_up % 4 + 1 if sense > 0 else (face_up - 2) % 4 + 1
    flat = setting is Setting.FLAT
    hanging = setting in (Setting.WALL, Setting.CREST)
    elevation = rest_elevation_rad(kind, face_up, sense) - (math.pi / 2 if hanging else 0.0)
    moment = kind.mass_kg * GRAVITY_M_S2 * hinge_radius_m(kind, face_up, sense)
    hold = Hold(
        weight_moment_N_m=0.0 if flat else moment,
        elevation_rad=0.0 if flat else elevation,
        end_rad=_QUARTERS[setting] * math.pi / 2,
        magnet_torque_N_m=holding_magnet_N_m(kind),
        magnet_angle_rad=kind.magnet_angle_rad,
        drag_N_m=face_drag_N_m(kind) if flat else 0.0,
    )
    return hold if flat else replace(hold, end_rad=_crown_rad(hold))


def _crown_rad(hold: Hold) -> float:
    """Angle at which V is greatest: top dead centre, or a little past it where magnets still
    pull there (2e-6 rad for a reach of 0.06 rad and 1.5 times the weight's torque). Never past
    the landing."""
    last = float(hold.end_rad)
    top = min(max(math.pi / 2 - float(hold.elevation_rad), 0.0), last)
    if hold.magnet_torque_N_m == 0.0 or float(hold.torque_N_m(last)) >= 0.0:
        return top if float(hold.torque_N_m(last)) < 0.0 else last
    low, high = top, last
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        low, high = (middle, high) if float(hold.torque_N_m(middle)) > 0.0 else (low, middle)
    return high
