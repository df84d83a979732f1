"""The brake's torque and its integrals: closed forms against sums, and the time to a stop."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.mechanics import brake
from sim_link.mechanics.arrays import PLAIN
from sim_link.mechanics.brake import Brakes

keeps = st.floats(0.05, 1.0)
decays = st.floats(1e-3, 1.0)
times = st.floats(1e-4, 2.0)


def brakes_of(torque: float, kept: float = 1.0, decay: float = 0.05) -> Brakes:
    """One brake, in plain numbers."""
    return Brakes(torque, 0.0, kept, decay, PLAIN, kept >= 1.0)  # type: ignore[arg-type]


def at(ask: object, brakes: Brakes, since: float) -> float:
    assert callable(ask)
    return float(ask(brakes, since))


def summed(ask: object, brakes: Brakes, until: float) -> float:
    """Simpson's rule in 400 parts."""
    weights = [1, *([4, 2] * 200)[:-1], 1]
    values = [at(ask, brakes, until * i / 400) for i in range(401)]
    return until / 1200 * math.fsum(w * v for w, v in zip(weights, values, strict=True))


def test_torque_by_hand() -> None:
    """2 N m of which 0.4 last: 2 at onset, 0.8 + 1.2/e after one decay time, 0.8 in the end."""
    fading = brakes_of(2.0, 0.4, 0.05)
    assert at(brake.torque_N_m, fading, 0.0) == pytest.approx(2.0)
    assert at(brake.torque_N_m, fading, 0.05) == pytest.approx(0.8 + 1.2 / math.e)
    assert at(brake.torque_N_m, fading, 5.0) == pytest.approx(0.8)


@given(kept=keeps, decay=decays, until=times)
def test_integrals_are_what_sums_give(kept: float, decay: float, until: float) -> None:
    """Up to 20 decay times, to what a sum in 400 parts can say."""
    brakes, until = brakes_of(0.7, kept, decay), min(until, 20.0 * decay)
    impulse = summed(brake.torque_N_m, brakes, until)
    assert at(brake.impulse_N_m_s, brakes, until) == pytest.approx(impulse, rel=1e-6)
    swept = summed(brake.impulse_N_m_s, brakes, until)
    assert at(brake.impulse_integral_N_m_s2, brakes, until) == pytest.approx(swept, rel=1e-6)


@given(kept=keeps, decay=decays, momentum=st.floats(1e-6, 1.0))
def test_stopping_time_uses_the_momentum_up(kept: float, decay: float, momentum: float) -> None:
    brakes = brakes_of(0.7, kept, decay)
    since = at(brake.stopping_s, brakes, momentum)
    assert at(brake.impulse_N_m_s, brakes, since) == pytest.approx(momentum, rel=1e-9)
    assert momentum / 0.7 * (1 - 1e-12) <= since <= momentum / (0.7 * kept) * (1 + 1e-12)


@given(decay=decays, since=times)
def test_kept_whole_is_steady_to_the_bit(decay: float, since: float) -> None:
    """Beside brakes that fade the exponentials are computed, and change nothing."""
    steady = brakes_of(0.7)
    among = Brakes(0.7, 0.0, 1.0, decay, PLAIN, False)  # type: ignore[arg-type]
    for ask in (
        brake.torque_N_m,
        brake.impulse_N_m_s,
        brake.impulse_integral_N_m_s2,
        brake.stopping_s,
    ):
        assert at(ask, among, since) == at(ask, steady, since)
    assert at(brake.impulse_N_m_s, steady, since) == 0.7 * since


def test_a_wheel_at_rest_stops_at_once() -> None:
    for kept in (1.0, 0.3):
        assert at(brake.stopping_s, brakes_of(0.7, kept), 0.0) == 0.0
