"""Turning on the spot: the closed form against an integration, and when there is no yaw."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sim_link.kinds import Kind, centre_inertia_kg_m2
from sim_link.mechanics import twist, twist_threshold
from sim_link.mechanics.twist import NO_YAW, NOT_FAR, yaw_friction_N_m
from tests.support.kinds import PLAIN, kind_with


def integrated_rad(kind: Kind, speed: float) -> float:
    """scipy.integrate.solve_ivp on (Ic - Iw) theta'' = tau - tf, Iw w' = -tau until they meet, then
    Ic theta'' = -tf, for a body that turns until then."""
    solve_ivp = pytest.importorskip("scipy.integrate").solve_ivp
    tf, inertia = yaw_friction_N_m(kind), centre_inertia_kg_m2(kind)
    wheel = kind.wheel_inertia_kg_m2

    def slipping(t: float, y: list[float]) -> list[float]:
        fading = (1.0 - kind.brake_kept) * math.exp(-t / kind.brake_decay_s)
        torque = kind.brake_torque_N_m * (kind.brake_kept + fading)
        return [y[1], (torque - tf) / (inertia - wheel), -torque / wheel]

    def gap(_t: float, y: list[float]) -> float:
        return y[2] - y[1]

    gap.terminal = True  # type: ignore[attr-defined]
    run = solve_ivp(slipping, (0, 5), [0, 0, speed], events=gap, rtol=1e-10, atol=1e-12)
    angle, rate, _ = run.y[:, -1]
    return float(angle + inertia * rate**2 / (2 * tf))


@pytest.mark.parametrize(("kept", "decay"), [(1.0, 0.05), (0.4, 0.01), (0.7, 0.002)])
@pytest.mark.parametrize("speed", [150.0, 800.0])
def test_as_an_ordinary_differential_equation_solver(
    kept: float, decay: float, speed: float
) -> None:
    kind = kind_with(brake_kept=kept, brake_decay_s=decay)
    assert twist(kind, speed).turned_rad == pytest.approx(integrated_rad(kind, speed), rel=1e-7)


@given(
    angle=st.floats(0.05, 6.0),
    times=st.floats(1.1, 300.0),
    kept=st.sampled_from([1.0, 0.95]),
)
@settings(max_examples=15)
def test_threshold_is_where_the_twist_gets_so_far(angle: float, times: float, kept: float) -> None:
    """For torques of 1.1 to 300 times the friction, steady or fading a little."""
    kind = kind_with(brake_torque_N_m=times * yaw_friction_N_m(PLAIN), brake_kept=kept)
    found = twist_threshold(kind, angle)
    assert found.feasible
    assert found.w_min_rad_s > found.w_ideal_rad_s
    assert twist(kind, found.w_min_rad_s).turned_rad == pytest.approx(angle, rel=1e-9)
    assert twist(kind, 0.999 * found.w_min_rad_s).turned_rad < angle


def test_ideal_speed_is_the_limit_of_a_strong_brake() -> None:
    """w = sqrt(2 Ic tf angle)/Iw; and by the closed form of a constant hold torque,
    w_ideal sqrt(1 + (1 - j)/(k - 1)) with j = Iw/Ic."""
    tf, inertia = yaw_friction_N_m(PLAIN), centre_inertia_kg_m2(PLAIN)
    ideal = math.sqrt(2 * inertia * tf * math.pi / 2) / PLAIN.wheel_inertia_kg_m2
    part = PLAIN.wheel_inertia_kg_m2 / inertia
    for times in (1.2, 3.0, 1e5):
        found = twist_threshold(kind_with(brake_torque_N_m=times * tf))
        assert found.w_ideal_rad_s == pytest.approx(ideal)
        exact = ideal * math.sqrt(1 + (1 - part) / (times - 1))
        assert found.w_min_rad_s == pytest.approx(exact, rel=1e-9)


def test_too_weak_a_brake_does_not_turn_the_body() -> None:
    kind = kind_with(brake_torque_N_m=0.9 * yaw_friction_N_m(PLAIN), brake_onset_s=0.002)
    found = twist_threshold(kind)
    assert not found.feasible
    assert found.reason == NO_YAW.format(ratio=0.9)
    assert found.torque_margin == pytest.approx(0.9)
    assert math.isnan(found.w_min_rad_s)
    still = twist(kind, 600.0)
    assert (still.turned_rad, still.settled) == (0.0, True)
    run_down_s = kind.wheel_inertia_kg_m2 * 600.0 / kind.brake_torque_N_m
    assert still.settle_s == pytest.approx(0.002 + run_down_s)


def test_a_brake_that_fades_may_not_turn_it_far() -> None:
    kind = kind_with(brake_kept=0.01, brake_decay_s=1e-4)
    found = twist_threshold(kind)
    assert not found.feasible
    assert found.reason == NOT_FAR
    assert found.torque_ratio == pytest.approx(0.5 / yaw_friction_N_m(PLAIN))
    assert 0.0 < twist(kind, 20 * found.w_ideal_rad_s).turned_rad < math.pi / 2


def test_a_wheel_at_rest_turns_nothing() -> None:
    assert twist(PLAIN, 0.0).turned_rad == 0.0


def test_onset_delays_and_costs_no_speed() -> None:
    late = kind_with(brake_onset_s=0.003)
    assert twist_threshold(late).w_min_rad_s == twist_threshold(PLAIN).w_min_rad_s
    assert twist(late, 500.0).brake_s == pytest.approx(twist(PLAIN, 500.0).brake_s + 0.003)
    assert twist(late, 500.0).settle_s == pytest.approx(twist(PLAIN, 500.0).settle_s + 0.003)
