"""Hold curves: what resists a pivot, as a torque and an energy of the body's angle.

Owns gravity's lift, the magnets' hold and the face drag about one hinge edge, for the four
settings. Knows no wheel and no brake (mechanics.py). SI units, radians, angles from rest.
"""

import math
from dataclasses import dataclass, replace
from typing import Final

from sim_link.kinds import Kind, hinge_radius_m, rest_elevation_rad

GRAVITY_M_S2: Final = 9.81
_HALVINGS: Final = 50


@dataclass(frozen=True, slots=True)
class Hold:
    """Hold torque T(theta) = dV/dtheta about one hinge edge, theta from rest to ``end_rad``.

    V = m g r (sin phi - sin phi0) + T0 theta0 (1 - e^(-theta/theta0)) + tf theta, where
    phi = phi0 + theta. ``end_rad`` is where the motion no longer needs the wheel: the
    crown of V for a floor pivot and a crest, the end of the turn for a wall.
    """

    weight_moment_N_m: float
    """m g r; zero where gravity acts along the hinge."""
    elevation_rad: float
    end_rad: float
    magnet_torque_N_m: float = 0.0
    magnet_angle_rad: float = 0.05
    drag_N_m: float = 0.0

    def torque_N_m(self, angle_rad: float) -> float:
        """T: the torque that gravity, magnets and drag put up at this angle."""
        magnets = self.magnet_torque_N_m * math.exp(-angle_rad / self.magnet_angle_rad)
        weight = self.weight_moment_N_m * math.cos(self.elevation_rad + angle_rad)
        return weight + magnets + self.drag_N_m

    def energy_J(self, angle_rad: float) -> float:
        """V: the work against that torque from rest up to this angle."""
        reach = self.magnet_angle_rad
        magnets = -self.magnet_torque_N_m * reach * math.expm1(-angle_rad / reach)
        rise = math.sin(self.elevation_rad + angle_rad) - math.sin(self.elevation_rad)
        return self.weight_moment_N_m * rise + magnets + self.drag_N_m * angle_rad


def holding_magnet_N_m(kind: Kind) -> float:
    """T0 where the kind is held, else zero: a module that stands free has nothing to hold to."""
    return kind.magnet_torque_N_m if kind.held else 0.0


def floor_hold(kind: Kind, face_up: int = 1, sense: int = 1) -> Hold:
    """Hold of a pivot about a bottom edge, up to its crown; ``face_up`` is 1 to 4.

    The crown is where the hold torque turns: top dead centre, or a little past it where
    magnets still pull there (2e-6 rad for a reach of 0.06 rad and 1.5 times the weight's torque;
    it matters for far-reaching ones). Never past the landing.
    """
    elevation = rest_elevation_rad(kind, face_up, sense)
    top_rad = math.pi / 2 - elevation
    hold = Hold(
        weight_moment_N_m=kind.mass_kg * GRAVITY_M_S2 * hinge_radius_m(kind, face_up, sense),
        elevation_rad=elevation,
        end_rad=top_rad,
        magnet_torque_N_m=holding_magnet_N_m(kind),
        magnet_angle_rad=kind.magnet_angle_rad,
    )
    if hold.magnet_torque_N_m == 0.0:
        return hold
    return replace(hold, end_rad=_crown_rad(hold, top_rad))


def _crown_rad(hold: Hold, top_rad: float) -> float:
    """Angle past top dead centre where weight and magnets balance; the torque falls there."""
    low, high = top_rad, math.pi / 2
    if hold.torque_N_m(high) >= 0.0:
        return high
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        low, high = (middle, high) if hold.torque_N_m(middle) > 0.0 else (low, middle)
    return high
