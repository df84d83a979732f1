"""Predictions: the right question to the mechanics, units, and figures that belong together."""

import math
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link import mechanics
from sim_link.deed import FREE, HELD, Deed
from sim_link.errors import SimStateError
from sim_link.fleet_file import SHIPPED, load_kinds
from sim_link.kinds import Kind
from sim_link.prediction import Question, predict, threshold_of
from tests.support.kinds import PLAIN, kind_with

RPM = 30.0 / math.pi
KINDS = [
    pytest.param(kind, id=f"{fleet}:{name}")
    for fleet in SHIPPED
    for name, kind in load_kinds(Path(fleet)).items()
]


@pytest.mark.parametrize("kind", KINDS)
def test_every_shipped_kind_can_pivot_on_the_floor_within_its_limit(kind: Kind) -> None:
    found = predict(Question(kind, Deed.FLOOR))
    assert found.feasible, found.reason
    assert found.w_min_rpm is not None
    assert found.w_ideal_rpm is not None
    # A corner that slides needs less than the hinge's ideal speed, down to sqrt(5/8) of it.
    least = found.w_ideal_rpm * (1.0 if kind.held else math.sqrt(5 / 8))
    assert least <= found.w_min_rpm <= kind.wheel_max_rpm
    assert found.torque_margin is not None
    assert found.torque_margin > 1.0


@given(speed_rpm=st.floats(1000.0, 12000.0), held=st.booleans())
def test_the_outcome_is_that_of_the_motion(speed_rpm: float, held: bool) -> None:
    kind = kind_with(held=held)
    found = predict(Question(kind, Deed.FLOOR, speed_rpm))
    faces = mechanics.pivot(kind, speed_rpm / RPM).faces
    assert found.outcome == {0: "short", 1: "landed"}.get(faces, "over")
    assert found.at_speed_rpm == pytest.approx(speed_rpm)
    energy = 0.5 * kind.wheel_inertia_kg_m2 * (speed_rpm / RPM) ** 2
    assert found.wheel_energy_J == pytest.approx(energy)


def test_at_the_least_speed_no_outcome_is_named() -> None:
    found = predict(Question(PLAIN, Deed.FLOOR))
    assert found.outcome is found.turned_deg is None
    assert found.at_speed_rpm == found.w_min_rpm
    assert found.brake_ms is not None
    assert found.brake_ms > 0.0


def test_the_rest_is_as_long_as_half_the_tipping_torque_makes_it() -> None:
    """Iw w / torque, and the motor's own torque is the smaller one here: 0.015 N m."""
    found = predict(Question(PLAIN, Deed.FLOOR, 3000.0))
    assert found.rest_ms == pytest.approx(1e3 * 1.5e-5 * 3000.0 / RPM / 0.015)


def test_an_offset_speaks_of_the_same_edge_in_every_setting() -> None:
    """Away from the hinge and up: on the floor, on a wall and over a crest the arm is as long."""
    kind = kind_with(com_offset_m=(0.006, -0.004), brake_torque_N_m=5.0)
    edge = mechanics.pivot_threshold(kind)
    far = kind_with(com_offset_m=(0.0, 0.0), brake_torque_N_m=5.0)
    for deed in (Deed.WALL, Deed.CREST):
        moved = threshold_of(Question(kind, deed)).w_ideal_rad_s
        centred = threshold_of(Question(far, deed)).w_ideal_rad_s
        # m g r (sin(phi0 + end) - sin(phi0)) with the arm of the offset, over that without.
        arm, plain = (0.036, 0.026), (0.03, 0.03)
        lifts = [x + z if deed is Deed.WALL else math.hypot(x, z) + x for x, z in (arm, plain)]
        inertia = [0.3 * (0.06**2 / 6 + x * x + z * z) for x, z in (arm, plain)]
        expected = math.sqrt(lifts[0] * inertia[0] / (lifts[1] * inertia[1]))
        assert moved / centred == pytest.approx(expected, rel=1e-9)
    assert edge.feasible


@pytest.mark.parametrize("deed", list(Deed))
def test_what_a_kind_is_not_made_for_is_impossible_with_a_reason(deed: Deed) -> None:
    for held in (True, False):
        found = predict(Question(kind_with(held=held, floor_friction=0.9), deed, 3000.0))
        if deed not in (HELD if held else FREE) and deed is not Deed.TWIST:
            assert not found.feasible
            assert found.reason
            assert found.outcome is None


def test_more_than_the_wheel_may_turn() -> None:
    slow = replace(PLAIN, wheel_max_rpm=1000.0)
    found = predict(Question(slow, Deed.FLOOR))
    assert not found.feasible
    assert "1,000" in found.reason
    assert found.w_min_rpm is not None
    assert found.w_min_rpm > 1000.0


@pytest.mark.parametrize(("angle", "outcome"), [(30.0, "landed"), (3000.0, "short")])
def test_a_twist_lands_from_its_angle_on(angle: float, outcome: str) -> None:
    free = kind_with(held=False)
    assert predict(Question(free, Deed.TWIST, 4000.0, angle)).outcome == outcome


@pytest.mark.parametrize("speed", [0.0, -5.0, math.nan, math.inf])
def test_a_speed_that_is_none(speed: float) -> None:
    with pytest.raises(SimStateError, match="above zero"):
        predict(Question(PLAIN, Deed.FLOOR, speed))
