"""Kinds: derived quantities against textbook formulas, and the reading of a table."""

import math
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.errors import SimError, SimInputError
from sim_link.kinds import (
    centre_inertia_kg_m2,
    edge_inertia_kg_m2,
    hinge_radius_m,
    kind_from_table,
    offset_m,
    rest_elevation_rad,
    slipping_inertia_kg_m2,
)
from tests.support.kinds import kind_with

TABLE: dict[str, object] = {
    "side_m": 0.08,
    "mass_kg": 0.60,
    "wheel_inertia_kg_m2": 6.0e-5,
    "body_inertia_kg_m2": 6.4e-4,
    "com_offset_m": [0.001, -0.002],
    "wheel_max_rpm": 9000,
    "brake_torque_N_m": 2.9,
    "brake_onset_s": 0.001,
    "spin_up_torque_N_m": 0.02,
    "magnet_torque_N_m": 0.35,
    "magnet_angle_rad": 0.06,
    "held": True,
    "floor_friction": 0.6,
    "face_friction": 0.1,
    "restitution": 0.2,
    "cell_capacity_mAh": 500,
    "cell_resistance_ohm": 0.12,
}
NEUTRAL = {
    "body_inertia_kg_m2": None,
    "com_offset_m": (0.0, 0.0),
    "brake_onset_s": 0.0,
    "magnet_torque_N_m": 0.0,
    "magnet_angle_rad": 0.05,
    "face_friction": 0.0,
    "restitution": 0.0,
}


def test_uniform_cube_has_the_textbook_inertias() -> None:
    """Solid cube: m a^2/6 about its centre, 2/3 m a^2 about an edge (any table of moments of
    inertia)."""
    kind = kind_with(side_m=0.1, mass_kg=1.2, wheel_inertia_kg_m2=1e-4)
    assert centre_inertia_kg_m2(kind) == pytest.approx(1.2 * 0.01 / 6)
    assert edge_inertia_kg_m2(kind) == pytest.approx(2 / 3 * 1.2 * 0.01)
    assert slipping_inertia_kg_m2(kind) == pytest.approx(2 / 3 * 1.2 * 0.01 - 1e-4)
    assert hinge_radius_m(kind) == pytest.approx(0.1 / math.sqrt(2))
    assert rest_elevation_rad(kind) == pytest.approx(math.pi / 4)


def test_stated_inertia_is_taken_as_it_is() -> None:
    kind = kind_with(side_m=0.1, mass_kg=1.0, body_inertia_kg_m2=0.003)
    assert centre_inertia_kg_m2(kind) == 0.003
    assert edge_inertia_kg_m2(kind) == pytest.approx(0.003 + 0.005)


def test_offset_moves_the_centre_of_mass_away_from_the_edge_and_up() -> None:
    kind = kind_with(side_m=0.08, com_offset_m=(0.02, -0.01))
    assert hinge_radius_m(kind) == pytest.approx(math.hypot(0.06, 0.03))
    assert math.tan(rest_elevation_rad(kind)) == pytest.approx(0.03 / 0.06)


@pytest.mark.parametrize(
    ("face_up", "forward_edge_m", "height_m"),
    [(1, 0.06, 0.03), (2, 0.05, 0.06), (3, 0.02, 0.05), (4, 0.03, 0.02)],
)
def test_offset_turns_with_the_body(face_up: int, forward_edge_m: float, height_m: float) -> None:
    """Drawn by hand: side 8, centre of mass 6 behind the forward edge and 3 above the floor.

    Rolled forward, what was the way to the forward edge is the height, and what was the height
    is the distance from the edge behind.
    """
    kind = kind_with(side_m=0.08, com_offset_m=(0.02, -0.01))
    away, up = offset_m(kind, face_up)
    assert (0.04 + away, 0.04 + up) == pytest.approx((forward_edge_m, height_m))
    back_away, back_up = offset_m(kind, face_up, -1)
    assert (0.04 + back_away, 0.04 + back_up) == pytest.approx((0.08 - forward_edge_m, height_m))


@given(
    away=st.floats(-0.039, 0.039),
    up=st.floats(-0.039, 0.039),
    face_up=st.integers(1, 4),
    sense=st.sampled_from([1, -1]),
)
def test_offset_keeps_its_length_in_every_posture(
    away: float, up: float, face_up: int, sense: int
) -> None:
    kind = kind_with(side_m=0.08, com_offset_m=(away, up))
    assert math.hypot(*offset_m(kind, face_up, sense)) == pytest.approx(math.hypot(away, up))


def test_reads_every_key_of_a_table() -> None:
    kind = kind_from_table("paver", TABLE, "here")
    for key, value in TABLE.items():
        expected = tuple(value) if isinstance(value, list) else value
        assert getattr(kind, key) == expected, key
    assert kind.name == "paver"
    assert isinstance(kind.wheel_max_rpm, float)


@pytest.mark.parametrize("key", sorted(NEUTRAL))
def test_what_is_neutral_may_be_left_out(key: str) -> None:
    table = {name: value for name, value in TABLE.items() if name != key}
    assert getattr(kind_from_table("k", table, "here"), key) == NEUTRAL[key]


@pytest.mark.parametrize("key", sorted(set(TABLE) - set(NEUTRAL)))
def test_what_matters_must_be_given(key: str) -> None:
    table = {name: value for name, value in TABLE.items() if name != key}
    with pytest.raises(SimInputError, match=key) as caught:
        kind_from_table("k", table, "fleet.toml, kind.k")
    assert str(caught.value).startswith("fleet.toml, kind.k: ")
    assert "\n" not in str(caught.value)
    assert (caught.value.where, caught.value.key) == ("fleet.toml, kind.k", key)


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("side_m", 0),
        ("side_m", -0.05),
        ("side_m", "0.05"),
        ("mass_kg", True),
        ("mass_kg", math.nan),
        ("mass_kg", math.inf),
        ("wheel_inertia_kg_m2", 0.0),
        ("wheel_inertia_kg_m2", 6.4e-4),
        ("body_inertia_kg_m2", [1]),
        ("com_offset_m", [0.0]),
        ("com_offset_m", 0.01),
        ("com_offset_m", [0.04, 0.0]),
        ("com_offset_m", [0.0, -0.05]),
        ("com_offset_m", [math.nan, 0.0]),
        ("com_offset_m", [True, 0.0]),
        ("wheel_max_rpm", 40_000),
        ("brake_torque_N_m", math.inf),
        ("brake_onset_s", -0.001),
        ("magnet_torque_N_m", -1),
        ("magnet_angle_rad", 0.0),
        ("held", 1),
        ("held", "yes"),
        ("floor_friction", 0.0),
        ("restitution", 1.0),
        ("colour", "red"),
    ],
)
def test_refuses_what_no_module_can_be(key: str, value: Any) -> None:
    with pytest.raises(SimInputError) as caught:
        kind_from_table("k", {**TABLE, key: value}, "here")
    assert isinstance(caught.value, SimError)
    assert caught.value.key == key


def test_a_wheel_cannot_be_harder_to_turn_than_the_module_it_is_part_of() -> None:
    with pytest.raises(SimInputError, match="wheel_inertia_kg_m2: below the inertia"):
        kind_from_table("k", {**TABLE, "body_inertia_kg_m2": 5.9e-5}, "here")


def test_unknown_key_is_answered_with_the_known_ones() -> None:
    with pytest.raises(SimInputError, match=r"weight: no such key; known are .*mass_kg"):
        kind_from_table("k", {**TABLE, "weight": 1}, "here")
