"""Motions whose figures were computed elsewhere, for parameters that are invented.

Origin: quadrature of the hinge equations, scipy.integrate.solve_ivp on the equations of motion and,
as a third way, the general physics library MuJoCo 4.0.0; the first two agree to 2e-6, the hinge
cases with MuJoCo to 1e-5. g = 9.81 m/s^2. Least speeds are MuJoCo's, in rad/s.
"""

from typing import NamedTuple


class Case(NamedTuple):
    """One kind and motion: ``least_rad_s`` None where no speed is enough."""

    name: str
    setting: str
    side_m: float
    mass_kg: float
    body_inertia_kg_m2: float | None
    wheel_inertia_kg_m2: float
    brake_torque_N_m: float
    magnet_torque_N_m: float
    magnet_angle_rad: float
    ideal_rad_s: float
    least_rad_s: float | None
    lock_rad: float | None = None
    brake_s: float | None = None
    over_rad_s: float | None = None
    """Where a second face follows: the landing on it followed by solve_ivp."""


HINGED = (
    Case("high", "floor", 0.04, 0.1, None, 4.5e-6, 3.924, 0.0, 0.05,
         292.6028, 293.306, 0.001984113, 0.0003222377, 1173.255),
    Case("mid", "floor", 0.055, 0.22, None, 1.1e-5, 0.593505, 0.0, 0.05,
         424.5952, 446.8425, 0.04049272, 0.008096228, 1777.068),
    Case("low", "floor", 0.07, 0.4, None, 3.2e-5, 0.27468, 0.0, 0.05,
         381.0291, 526.6132, 0.204264, 0.06053616, 1455.222),
    Case("barely", "floor", 0.05, 0.16, None, 8e-6, 0.041202, 0.0, 0.05,
         368.0324, 1193.101, 0.3913932, 0.2305618),
    Case("hold", "floor", 0.08, 0.6, None, 6e-5, 2.9272, 0.35, 0.06,
         410.5669, 454.6, 0.03969574, 0.00913767),
    Case("wall", "wall", 0.05, 0.15, 6.25e-5, 9e-6, 2.73575, 0.1, 0.05,
         696.4416, 712.8151, 0.0277292, 0.002264196),
    Case("crest", "crest", 0.06, 0.25, None, 2.5e-5, 0.5886, 0.0, 0.05,
         583.9876, 624.6484, 0.2909154, 0.02557056),
    Case("flat", "flat", 0.05, 0.15, 6.25e-5, 9e-6, 0.36, 0.06, 0.08,
         172.1326, 187.5242, 0.01292494, 0.004545178),
    Case("stuck", "floor", 0.06, 0.28, None, 2.4e-5, 0.1257838, 0.05, 0.05, 292.3639, None),
)  # fmt: skip

FREE = Case("free", "floor", 0.05, 0.16, None, 8e-6, 0.11772, 0.0, 0.05, 368.0324, 445.9807)
FREE_FRICTION = 0.9
"""R1: sticks all the way, since it needs 0.436 of friction; a hinge would need 445.985."""

HOP = Case("hop", "floor", 0.05, 0.16, None, 8e-6, 5.886, 0.0, 0.05, 368.0324, None)
HOP_FRICTION = 1.2
HOP_RAD_S = 1104.097
HOP_RISE_M = 0.03344495
"""Rigid contact; MuJoCo's soft ones tend to it from above: 33.66, 33.56 and 33.47 mm."""
