"""The wheel's speed between events: constant torque, by hand."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.wheel import RPM_A_RAD_S, Wheel

S = 1_000_000_000
SPEEDS = st.floats(-1000.0, 1000.0)


def test_rpm_from_radians() -> None:
    # One turn a second is 2 pi rad/s and 60 rpm.
    assert 2 * math.pi * RPM_A_RAD_S == pytest.approx(60.0)


def test_constant_torque_gives_a_straight_line() -> None:
    wheel = Wheel()
    assert wheel.ramp(400.0, 200.0, 5 * S) == 7 * S
    assert [wheel.speed_rad_s(t * S) for t in (5, 6, 7, 9)] == [0.0, 200.0, 400.0, 400.0]


def test_a_new_ramp_starts_where_the_old_one_is() -> None:
    wheel = Wheel()
    wheel.ramp(400.0, 200.0, 0)
    assert wheel.ramp(0.0, 100.0, S) == 3 * S
    assert wheel.speed_rad_s(2 * S) == pytest.approx(100.0)


def test_no_change_takes_no_time() -> None:
    wheel = Wheel()
    assert wheel.ramp(0.0, 10.0, 77) == 77
    assert wheel.rpm(77) == 0.0


@given(SPEEDS, SPEEDS, st.floats(0.1, 1e5), st.integers(0, 10**12))
def test_a_ramp_reaches_its_target_and_not_before(
    first: float, second: float, rate: float, t_ns: int
) -> None:
    wheel = Wheel()
    end_ns = wheel.ramp(second, rate, wheel.ramp(first, rate, t_ns))
    assert wheel.speed_rad_s(end_ns) == second
    low, high = sorted((first, second))
    for part in (0.25, 0.5, 0.75):
        start_ns = t_ns + math.ceil(abs(first) / rate * 1e9)
        speed = wheel.speed_rad_s(start_ns + int(part * (end_ns - start_ns)))
        assert low - 1e-6 <= speed <= high + 1e-6
