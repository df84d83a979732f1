"""Thresholds and still torques.

The cases' parameters are invented. Their figures were computed outside this project with
scipy.integrate.solve_ivp on the equations of motion and, to 1e-5 of it, with the general
physics library MuJoCo 4.0.0 (a hinge, a wheel, a limited brake); g = 9.81 m/s^2.
"""

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from sim_link.kinds import Kind, edge_inertia_kg_m2
from sim_link.mechanics import (
    pivot,
    pivot_threshold,
)
from sim_link.mechanics.hold import GRAVITY_M_S2, Hold, hold_of
from sim_link.mechanics.threshold import HingeThresholds, closed_form_rad_s, hinge_thresholds
from tests.support.kinds import PLAIN, kind_with

RPM = 60 / (2 * math.pi)


def hinge(hold: Hold, edge: float, wheel: float, brake: float) -> dict[str, float]:
    """The threshold of one hinge, as plain numbers."""
    found = hinge_thresholds(hold, *(np.asarray(part) for part in (edge, wheel, brake)))
    return {name: float(getattr(found, name)) for name in HingeThresholds.__slots__}


# name: side, mass, wheel inertia, brake torque, T0, theta0, and computed: ideal rpm, least rpm,
# lock angle rad, brake time s.

# setting: m g r, edge inertia, wheel inertia, brake, T0, theta0, phi0, end in units of pi, and
# computed: ideal rad/s, least rad/s, lock angle, brake time.

# Exact over ideal speed of a floor pivot by k, for j = Iw/Ie of 0.03, 0.1 and 0.3.


def _floor_kind(parameters: tuple[float, ...]) -> Kind:
    side, mass, wheel, brake, magnet, angle = parameters
    return kind_with(
        side_m=side,
        mass_kg=mass,
        wheel_inertia_kg_m2=wheel,
        brake_torque_N_m=brake,
        magnet_torque_N_m=magnet,
        magnet_angle_rad=angle,
    )


@given(ratio=st.floats(1.01, 500), part=st.floats(0.001, 0.5), torque=st.floats(1e-3, 10))
def test_constant_hold_torque_has_a_closed_form(ratio: float, part: float, torque: float) -> None:
    """w = w_ideal sqrt(1 + (1 - j)/(k - 1)): uniform accelerations, by hand."""
    edge = 4e-4
    hold = Hold(0.0, 0.0, 1.2, drag_N_m=torque)
    found = hinge(hold, edge, part * edge, ratio * torque)
    expected = math.sqrt(1 + (1 - part) / (ratio - 1))
    assert found["w_min_rad_s"] / found["w_ideal_rad_s"] == pytest.approx(expected, rel=1e-9)
    formula = closed_form_rad_s(hold, *map(np.asarray, (edge, part * edge, ratio * torque)))
    assert found["w_min_rad_s"] == pytest.approx(float(formula), rel=1e-9)


def test_against_an_ordinary_differential_equation_solver() -> None:
    """scipy.integrate.solve_ivp on Ib theta'' = tau - T, Iw w' = -tau, then Ie theta'' = -T:
    from the threshold the body reaches top dead centre with no rate to spare."""
    solve_ivp = pytest.importorskip("scipy.integrate").solve_ivp
    kind = kind_with(com_offset_m=(0.006, -0.004), magnet_torque_N_m=0.12, brake_torque_N_m=0.6)
    found, hold, edge = pivot_threshold(kind), hold_of(kind), edge_inertia_kg_m2(kind)
    wheel, brake = kind.wheel_inertia_kg_m2, kind.brake_torque_N_m

    def slipping(_t: float, y: list[float]) -> list[float]:
        return [y[1], (brake - hold.torque_N_m(y[0])) / (edge - wheel), -brake / wheel]

    def gap(_t: float, y: list[float]) -> float:
        return y[2] - y[1]

    gap.terminal = True  # type: ignore[attr-defined]
    run = solve_ivp(slipping, (0, 1), [0, 0, found.w_min_rad_s], events=gap, rtol=1e-11, atol=1e-13)
    angle, rate, _ = run.y[:, -1]
    assert run.t[-1] == pytest.approx(found.brake_s, rel=1e-6)
    assert angle == pytest.approx(found.lock_angle_rad, rel=1e-6)
    left = 0.5 * edge * rate**2 - (hold.energy_J(hold.end_rad) - hold.energy_J(angle))
    assert abs(left) < 1e-7 * hold.energy_J(hold.end_rad)


@pytest.mark.parametrize(("part", "feasible"), [(0.6535, False), (0.6548, True)])
def test_a_wall_can_stall_a_brake_that_lifts(part: float, feasible: bool) -> None:
    """A wall needs tau > max V/theta = 0.654 m g a, though the hold at rest is m g a / 2.

    0.6541 is the maximum of ((1 + sin x - cos x)/2)/x, found by hand to four digits.
    """
    weight_side = 0.3 * GRAVITY_M_S2 * 0.06
    hold = Hold(weight_side / math.sqrt(2), -math.pi / 4, math.pi / 2)
    found = hinge(hold, 7.2e-4, 2e-5, part * weight_side)
    assert found["ratio"] > 1.3
    assert math.isnan(found["w_min_rad_s"]) is not feasible
    assert (found["margin"] >= 1.0) is feasible


def test_magnets_hold_only_what_is_held() -> None:
    magnets = kind_with(magnet_torque_N_m=0.2, held=False)
    assert hold_of(magnets).torque_N_m(0.0) == hold_of(PLAIN).torque_N_m(0.0)


def test_hold_torque_is_the_slope_of_its_energy() -> None:
    hold = Hold(0.2, 0.7, 0.8, 0.3, 0.06, 0.01)
    for angle in (0.01, 0.05, 0.3, 0.8):
        slope = (hold.energy_J(angle + 1e-6) - hold.energy_J(angle - 1e-6)) / 2e-6
        assert slope == pytest.approx(hold.torque_N_m(angle), rel=1e-7)


def test_lift_of_a_uniform_cube_on_the_floor() -> None:
    """(1/sqrt 2 - 1/2) m g a = 0.2071 m g a."""
    hold = hold_of(PLAIN)
    weight_side = PLAIN.mass_kg * GRAVITY_M_S2 * PLAIN.side_m
    assert hold.energy_J(hold.end_rad) == pytest.approx((math.sqrt(0.5) - 0.5) * weight_side)
    assert hold.torque_N_m(0.0) == pytest.approx(weight_side / 2)


def test_far_reaching_magnets_move_the_crown_past_top_dead_centre() -> None:
    """Magnets of 0.1 N m reaching 0.4 rad hold on past 45 degrees: at the crown they balance
    the weight, which by then turns the body on."""
    hold = hold_of(kind_with(magnet_torque_N_m=0.1, magnet_angle_rad=0.4))
    weight = PLAIN.mass_kg * GRAVITY_M_S2 * PLAIN.side_m / math.sqrt(2)
    magnets = 0.1 * math.exp(-hold.end_rad / 0.4)
    assert hold.end_rad > math.pi / 4 + 0.05
    assert weight * math.sin(hold.end_rad - math.pi / 4) == pytest.approx(magnets)
    stronger = hold_of(kind_with(magnet_torque_N_m=3.0, magnet_angle_rad=0.8))
    assert stronger.end_rad == pytest.approx(math.pi / 2)


kinds = st.builds(
    kind_with,
    side_m=st.floats(0.03, 0.15),
    mass_kg=st.floats(0.05, 2.0),
    wheel_inertia_kg_m2=st.just(5e-6),
    brake_torque_N_m=st.floats(0.02, 5.0),
    magnet_torque_N_m=st.sampled_from([0.0, 0.1, 0.5]),
    magnet_angle_rad=st.floats(0.02, 0.2),
    spin_up_torque_N_m=st.floats(1e-3, 1.0),
    floor_friction=st.floats(0.05, 1.2),
    held=st.booleans(),
)


def _hinged_w_min(kind: Kind) -> float:
    """Least speed, infinite where there is none."""
    edge = edge_inertia_kg_m2(kind)
    found = hinge(hold_of(kind), edge, kind.wheel_inertia_kg_m2, kind.brake_torque_N_m)
    return math.inf if math.isnan(found["w_min_rad_s"]) else found["w_min_rad_s"]


@given(kind=kinds, factor=st.floats(1.0, 20.0))
def test_more_brake_torque_never_asks_for_more_speed(kind: Kind, factor: float) -> None:
    stronger = kind_with(**{**_fields(kind), "brake_torque_N_m": factor * kind.brake_torque_N_m})
    assert _hinged_w_min(stronger) <= _hinged_w_min(kind) * (1 + 1e-9)


@given(kind=kinds, factor=st.floats(1.0, 4.0))
def test_more_mass_never_asks_for_less_speed(kind: Kind, factor: float) -> None:
    """For uniform cubes of 0.05 to 8 kg, all else equal: lift and inertia both grow."""
    heavier = kind_with(**{**_fields(kind), "mass_kg": factor * kind.mass_kg})
    assert _hinged_w_min(heavier) >= _hinged_w_min(kind) * (1 - 1e-9)


def _fields(kind: Kind) -> dict[str, object]:
    return {name: getattr(kind, name) for name in type(kind).__slots__}


@given(kind=kinds)
@settings(max_examples=25, deadline=None)
def test_threshold_and_motion_agree(kind: Kind) -> None:
    """Quadrature and the followed motion are two ways to one answer; here within 1e-3, as
    is asked of both, for held hinges of every strength above k = 1.02."""
    kind = kind_with(**{**_fields(kind), "held": True})
    w_min = _hinged_w_min(kind)
    assume(kind.brake_torque_N_m > 1.02 * hold_of(kind).torque_N_m(0.0))
    below, above = (pivot(kind, w_min * part) for part in (0.999, 1.001))
    assert (below.faces, above.faces) == (0, 1)
    assert below.peak_tilt_rad < hold_of(kind).end_rad < above.peak_tilt_rad
