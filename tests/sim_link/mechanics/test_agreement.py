"""Closed form, quadrature and followed motion: three ways to one answer, and what holds of it."""

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.codes import Setting
from sim_link.kinds import Kind, edge_inertia_kg_m2
from sim_link.mechanics import pivot
from sim_link.mechanics.hold import hold_of
from sim_link.mechanics.threshold import closed_form_rad_s, hinge_thresholds
from tests.support.kinds import kind_with
from tests.support.motions import FACE, SETTINGS, changed, least_speed

kinds = st.builds(
    kind_with,
    side_m=st.floats(0.03, 0.15),
    mass_kg=st.floats(0.05, 2.0),
    wheel_inertia_kg_m2=st.just(5e-6),
    brake_torque_N_m=st.floats(0.02, 5.0),
    magnet_torque_N_m=st.sampled_from([0.0, 0.1, 0.5]),
    face_friction=st.floats(0.05, 0.5),
)


def parts(kind: Kind, setting: Setting) -> tuple[Any, ...]:
    edge = edge_inertia_kg_m2(kind, 1, 1)
    numbers = edge, kind.wheel_inertia_kg_m2, kind.brake_torque_N_m
    return hold_of(kind, FACE[setting], 1, setting), *map(np.asarray, numbers)


def by_quadrature(kind: Kind, setting: Setting) -> float:
    """Least speed of the hinge, infinite where there is none."""
    found = float(hinge_thresholds(*parts(kind, setting)).w_min_rad_s)
    return math.inf if math.isnan(found) else found


@pytest.mark.parametrize("torque", [0.045, 0.1, 2.0])
def test_constant_hold_torque_three_ways(torque: float) -> None:
    """Flat with drag only."""
    kind = kind_with(face_friction=0.2, brake_torque_N_m=torque)
    exact = float(closed_form_rad_s(*parts(kind, Setting.FLAT)))
    assert by_quadrature(kind, Setting.FLAT) == pytest.approx(exact, rel=1e-9)
    moved = least_speed(kind, 1, (0.9 * exact, 1.1 * exact), Setting.FLAT)
    assert moved == pytest.approx(exact, rel=1e-5)


@pytest.mark.parametrize("setting", SETTINGS)
@pytest.mark.parametrize("magnets", [0.0, 0.12])
def test_quadrature_is_where_the_motion_lands(setting: Setting, magnets: float) -> None:
    kind = kind_with(magnet_torque_N_m=magnets, face_friction=0.05, com_offset_m=(0.004, -0.003))
    least = by_quadrature(kind, setting)
    faces = 2 if setting is Setting.CREST else 1
    moved = least_speed(kind, faces, (0.9 * least, 1.1 * least), setting)
    assert moved == pytest.approx(least, rel=1e-5)


@pytest.mark.parametrize("setting", SETTINGS)
@given(kind=kinds, factor=st.floats(1.0, 20.0))
def test_more_brake_torque_never_asks_for_more_speed(
    setting: Setting, kind: Kind, factor: float
) -> None:
    """Held uniform cubes of 3 to 15 cm, 0.05 to 2 kg, up to twenty times the torque."""
    stronger = changed(kind, brake_torque_N_m=factor * kind.brake_torque_N_m)
    assert by_quadrature(stronger, setting) <= by_quadrature(kind, setting) * (1 + 1e-9)


@pytest.mark.parametrize("setting", SETTINGS)
@given(kind=kinds, factor=st.floats(1.0, 4.0))
def test_more_mass_never_asks_for_less_speed(setting: Setting, kind: Kind, factor: float) -> None:
    """The same up to 8 kg, all else equal: lift or drag and inertia both grow."""
    heavier = changed(kind, mass_kg=factor * kind.mass_kg)
    assert by_quadrature(heavier, setting) >= by_quadrature(kind, setting) * (1 - 1e-9)


@pytest.mark.parametrize("setting", SETTINGS)
@given(
    offset=st.tuples(st.floats(-0.01, 0.01), st.floats(-0.01, 0.01)),
    speed=st.floats(200.0, 2000.0),
    face_up=st.integers(1, 4),
)
@settings(max_examples=10)
def test_back_is_forward_in_a_mirror(
    setting: Setting, offset: tuple[float, float], speed: float, face_up: int
) -> None:
    """A held module seen from its other side: the offset mirrored, faces 2 and 4 exchanged."""
    kind = kind_with(com_offset_m=offset, face_friction=0.1)
    mirrored = changed(kind, com_offset_m=(-offset[0], offset[1]))
    other = {1: 1, 2: 4, 3: 3, 4: 2}[face_up]
    one = pivot(kind, speed, face_up, 1, setting=setting)
    two = pivot(mirrored, speed, other, -1, setting=setting)
    assert one.faces == two.faces
    assert one.peak_tilt_rad == pytest.approx(two.peak_tilt_rad, rel=1e-9)
    assert one.settle_s == pytest.approx(two.settle_s, rel=1e-6)
