"""Torques that must move nothing: thresholds by hand, and resting tried as a brake everywhere."""

import itertools
import math
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import sim_link
from protocol.codes import Setting
from sim_link.errors import SimStateError
from sim_link.fleet_file import load_fleet
from sim_link.kinds import Kind
from sim_link.mechanics import (
    GRAVITY_M_S2,
    pivot,
    rest_s,
    rest_torque_N_m,
    tipping_torque_N_m,
    twist,
)
from sim_link.mechanics.twist import yaw_friction_N_m
from tests.support.kinds import PLAIN, kind_with
from tests.support.motions import changed

FLEETS = sorted((Path(sim_link.__file__).parent / "fleets").glob("*.toml"))
SHIPPED = [kind for path in FLEETS for kind in load_fleet(path).kinds.values()]
SENSES = (1, -1)

kinds = st.builds(
    kind_with,
    side_m=st.floats(0.03, 0.15),
    mass_kg=st.floats(0.05, 2.0),
    wheel_inertia_kg_m2=st.just(5e-6),
    magnet_torque_N_m=st.sampled_from([0.0, 0.1, 0.5]),
    magnet_angle_rad=st.floats(0.02, 0.2),
    spin_up_torque_N_m=st.floats(1e-3, 1.0),
    floor_friction=st.floats(0.05, 1.2),
    face_friction=st.sampled_from([0.0, 0.2]),
    held=st.booleans(),
)


def settings_of(kind: Kind, face_up: int) -> list[Setting]:
    """Where a module can be with this face up; with its axis upright it may turn about an edge."""
    if face_up > 4:
        return [Setting.FLAT] if kind.held else []
    return [Setting.FLOOR, Setting.WALL, Setting.CREST] if kind.held else [Setting.FLOOR]


def assert_still(kind: Kind, face_up: int, sense: int) -> None:
    """The resting torque, put on at once as a brake would, moves nothing in any setting."""
    gentle = changed(kind, brake_torque_N_m=rest_torque_N_m(kind, face_up, sense))
    speed = kind.wheel_max_rpm * math.pi / 30
    for setting in settings_of(kind, face_up):
        moved = pivot(gentle, speed, (face_up - 1) % 4 + 1, sense, setting=setting)
        where = (kind.name, face_up, sense, setting)
        assert (moved.peak_tilt_rad, moved.faces, moved.settled) == (0.0, 0, True), where
    if face_up > 4:
        assert twist(gentle, speed).turned_rad == 0.0


@pytest.mark.parametrize("kind", SHIPPED, ids=lambda kind: kind.name)
@pytest.mark.parametrize(("face_up", "sense"), list(itertools.product(range(1, 7), SENSES)))
def test_resting_moves_no_shipped_kind(kind: Kind, face_up: int, sense: int) -> None:
    assert_still(kind, face_up, sense)


def test_the_shipped_kinds_are_all_there() -> None:
    """Held ones and others, with an offset and without: the test above is of something."""
    assert len(SHIPPED) == 8
    assert {kind.held for kind in SHIPPED} == {True, False}
    assert any(kind.com_offset_m != (0.0, 0.0) for kind in SHIPPED)


@given(
    kind=kinds,
    offset=st.tuples(st.floats(-0.3, 0.3), st.floats(-0.3, 0.3)),
    face_up=st.integers(1, 6),
    sense=st.sampled_from(SENSES),
)
def test_resting_moves_no_kind(
    kind: Kind, offset: tuple[float, float], face_up: int, sense: int
) -> None:
    """Cubes of 3 to 15 cm, 0.05 to 2 kg, centre of mass up to 0.3 of the side off centre."""
    kind = changed(kind, com_offset_m=tuple(part * kind.side_m for part in offset))
    rest = rest_torque_N_m(kind, face_up, sense)
    assert 0.0 < rest <= kind.spin_up_torque_N_m
    assert rest <= tipping_torque_N_m(kind, face_up, sense) / 2
    assert_still(kind, face_up, sense)


@given(
    offset=st.tuples(st.floats(-0.02, 0.02), st.floats(-0.02, 0.02)),
    held=st.booleans(),
    face_up=st.integers(1, 4),
    sense=st.sampled_from(SENSES),
)
@settings(max_examples=20)
def test_a_little_more_than_the_tipping_torque_moves_something(
    offset: tuple[float, float], held: bool, face_up: int, sense: int
) -> None:
    """Offsets up to a third of the side: the tipping torque is the least, to 1e-3, in one of the
    settings, and moves nothing in the others."""
    kind = kind_with(com_offset_m=offset, held=held)
    tipping = tipping_torque_N_m(kind, face_up, sense)
    for part, moves in ((0.999, False), (1.001, True)):
        tried = changed(kind, brake_torque_N_m=part * tipping)
        tilts = [
            pivot(tried, 400.0, face_up, sense, setting=setting).peak_tilt_rad
            for setting in settings_of(kind, face_up)
        ]
        assert (max(tilts) > 0.0) is moves


def test_tipping_torque_by_hand() -> None:
    """Weight 3 N (0.3058 kg): levers 35 and 25 mm of a 60 mm cube, 5 mm off centre, 28 and 32 mm
    the other way round. A held one may hang on its upper edge: on the same side, the same lever."""
    kind = kind_with(mass_kg=3 / 9.81, com_offset_m=(0.005, 0.002), magnet_torque_N_m=0.04)
    assert tipping_torque_N_m(kind, 1, 1) == pytest.approx(0.105 + 0.04)
    assert tipping_torque_N_m(kind, 1, -1) == pytest.approx(0.075 + 0.04)
    assert tipping_torque_N_m(kind, 3, 1) == pytest.approx(0.075 + 0.04)
    assert tipping_torque_N_m(kind, 2, 1) == pytest.approx(3 * 0.028 + 0.04)
    free = kind_with(mass_kg=3 / 9.81, com_offset_m=(0.005, 0.002), held=False)
    assert tipping_torque_N_m(free, 1, 1) == pytest.approx(0.105)


def test_yaw_friction_of_an_upright_axis_by_summing_over_the_face() -> None:
    """Torque of uniform Coulomb friction about the centre: mu p times the sum of distances."""
    cells = [(i + 0.5) / 200 - 0.5 for i in range(200)]
    mean = sum(math.hypot(x, y) for x in cells for y in cells) / 200**2
    weight = PLAIN.mass_kg * GRAVITY_M_S2
    expected = PLAIN.floor_friction * weight * PLAIN.side_m * mean
    assert yaw_friction_N_m(PLAIN) == pytest.approx(expected, rel=1e-4)
    for face_up, sense in itertools.product((5, 6), SENSES):
        assert tipping_torque_N_m(PLAIN, face_up, sense) == pytest.approx(expected, rel=1e-4)


def test_magnets_about_an_upright_edge_where_they_are_weaker_than_the_floor() -> None:
    magnets = 0.3 * yaw_friction_N_m(PLAIN)
    kind = kind_with(magnet_torque_N_m=magnets)
    assert tipping_torque_N_m(kind, 5, 1) == pytest.approx(magnets)
    assert tipping_torque_N_m(changed(kind, held=False), 5, 1) == yaw_friction_N_m(PLAIN)


def test_time_to_rest_is_the_wheels_momentum_over_the_torque() -> None:
    """Iw w / tau: half the hold of 3 N at 30 mm is 0.045 N m, above the motor's 0.015."""
    kind = kind_with(mass_kg=3 / 9.81)
    assert rest_torque_N_m(kind, 1, 1) == 0.015
    assert rest_s(kind, 600.0) == pytest.approx(1.5e-5 * 600.0 / 0.015)
    strong = changed(kind, spin_up_torque_N_m=1.0)
    assert rest_s(strong, 600.0) == pytest.approx(1.5e-5 * 600.0 / 0.045)


@pytest.mark.parametrize(("face_up", "sense"), [(0, 1), (7, 1), (-1, 1), (1, 0), (1, 2)])
def test_refuses_a_posture_that_is_none(face_up: int, sense: int) -> None:
    for ask in (tipping_torque_N_m, rest_torque_N_m):
        with pytest.raises(SimStateError):
            ask(PLAIN, face_up, sense)
