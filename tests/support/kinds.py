"""Kinds made for tests: a plain cube whose parameters a test changes one by one."""

from dataclasses import replace
from typing import Any

from sim_link.kinds import Kind

PLAIN = Kind(
    name="plain",
    side_m=0.06,
    mass_kg=0.3,
    wheel_inertia_kg_m2=1.5e-5,
    body_inertia_kg_m2=None,
    com_offset_m=(0.0, 0.0),
    wheel_max_rpm=9000.0,
    brake_torque_N_m=0.5,
    brake_onset_s=0.0,
    spin_up_torque_N_m=0.015,
    magnet_torque_N_m=0.0,
    magnet_angle_rad=0.05,
    held=True,
    floor_friction=0.8,
    face_friction=0.0,
    restitution=0.0,
    cell_capacity_mAh=400.0,
    cell_resistance_ohm=0.15,
)


def kind_with(**changes: Any) -> Kind:
    """The plain cube with some fields changed."""
    return replace(PLAIN, **changes)
