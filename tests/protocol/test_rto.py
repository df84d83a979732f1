"""The round-trip estimator against RFC 6298 section 2, worked by hand."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.errors import LocalProtocolError
from protocol.rto import RoundTripEstimator

STEADY = settings(derandomize=True, deadline=None)
"""The same examples each time, and no deadline on a busy machine."""

MS = 1_000_000
WIDE = (250 * MS, 1, 60_000 * MS, 1)


def test_the_rfc_by_hand() -> None:
    # RFC 6298 section 2, looked up; steps by hand in ms, G = 100 ms, no floor. Each row:
    # R', SRTT, RTTVAR, RTO = SRTT + max(G, 4 RTTVAR).
    estimator = RoundTripEstimator(1000 * MS, MS, 60_000 * MS, 100 * MS)
    for rtt_ms, mean_ms, variation_ms, timeout_ms in [
        (500, 500, 250, 1500),
        (700, 525, 237.5, 1475),  # 3/4 250 + 1/4 |500 - 700|; 7/8 500 + 1/8 700
        (300, 496.875, 234.375, 1434.375),  # 3/4 237.5 + 1/4 |525 - 300|; 7/8 525 + 1/8 300
    ]:
        estimator.sample(rtt_ms * MS)
        assert estimator.mean_ns == int(mean_ms * MS)
        assert estimator.variation_ns == int(variation_ms * MS)
        assert estimator.timeout_ns == int(timeout_ms * MS)


def test_the_variation_uses_the_mean_before_the_sample() -> None:
    # Section 2.3: with the mean updated first it would be 3/4 250 + 1/4 |525 - 700| = 231.25.
    estimator = RoundTripEstimator(*WIDE)
    estimator.sample(500 * MS)
    estimator.sample(700 * MS)
    assert estimator.variation_ns == 237_500_000


def test_before_the_first_sample_the_initial_timeout_holds() -> None:
    estimator = RoundTripEstimator(250 * MS, 30 * MS, 2000 * MS, MS)
    assert (estimator.timeout_ns, estimator.mean_ns, estimator.variation_ns) == (250 * MS, None, 0)


def test_the_first_sample_gives_three_times_itself() -> None:
    # Section 2.2: SRTT = R, RTTVAR = R/2, RTO = R + 4 R/2.
    estimator = RoundTripEstimator(*WIDE)
    estimator.sample(40 * MS)
    assert estimator.timeout_ns == 120 * MS


def test_the_clock_granularity_is_the_least_allowance() -> None:
    estimator = RoundTripEstimator(250 * MS, 1, 60_000 * MS, 10 * MS)
    for _ in range(200):
        estimator.sample(40 * MS)
    assert estimator.timeout_ns == 50 * MS


def test_bounds_hold_for_the_timeout_only() -> None:
    estimator = RoundTripEstimator(250 * MS, 30 * MS, 2000 * MS, MS)
    estimator.sample(1 * MS)
    assert (estimator.timeout_ns, estimator.mean_ns) == (30 * MS, MS)
    for _ in range(100):
        estimator.sample(5000 * MS)
    assert estimator.timeout_ns == 2000 * MS
    assert estimator.mean_ns == pytest.approx(5000 * MS, rel=1e-3)


def test_the_initial_timeout_is_bounded_too() -> None:
    assert RoundTripEstimator(9000 * MS, 30 * MS, 2000 * MS, MS).timeout_ns == 2000 * MS


def test_there_is_no_floor_of_one_second() -> None:
    estimator = RoundTripEstimator(*WIDE)
    for _ in range(100):
        estimator.sample(10 * MS)
    assert estimator.timeout_ns < 11 * MS


def test_in_doubt_it_waits_the_initial_timeout_until_the_next_sample() -> None:
    estimator = RoundTripEstimator(250 * MS, 30 * MS, 2000 * MS, MS)
    estimator.sample(40 * MS)
    estimator.doubt()
    assert estimator.timeout_ns == 250 * MS
    assert estimator.mean_ns == 40 * MS
    estimator.sample(80 * MS)
    # By hand, RFC 6298 section 2.3: RTTVAR 20 -> 20 * 3/4 + 40 / 4 = 25, SRTT 40 -> 45.
    assert (estimator.mean_ns, estimator.variation_ns) == (45 * MS, 25 * MS)
    assert estimator.timeout_ns == 145 * MS


def test_doubt_never_shortens_a_longer_timeout() -> None:
    estimator = RoundTripEstimator(250 * MS, 30 * MS, 2000 * MS, MS)
    estimator.sample(400 * MS)
    before_ns = estimator.timeout_ns
    estimator.doubt()
    assert estimator.timeout_ns == before_ns == 1200 * MS


@STEADY
@given(st.lists(st.integers(0, 10_000 * MS), min_size=1, max_size=50))
def test_follows_the_rfc_in_real_numbers(samples: list[int]) -> None:
    estimator = RoundTripEstimator(250 * MS, 30 * MS, 2000 * MS, MS)
    mean = variation = 0.0
    for index, rtt in enumerate(samples):
        estimator.sample(rtt)
        if index == 0:
            mean, variation = rtt, rtt / 2
        else:
            variation = 0.75 * variation + 0.25 * abs(mean - rtt)
            mean = 0.875 * mean + 0.125 * rtt
    wanted = min(max(mean + max(MS, 4 * variation), 30 * MS), 2000 * MS)
    assert estimator.timeout_ns == pytest.approx(wanted, abs=100)


@STEADY
@given(st.lists(st.integers(0, 10_000 * MS)))
def test_the_mean_never_leaves_what_was_measured(samples: list[int]) -> None:
    estimator = RoundTripEstimator(*WIDE)
    for index, rtt in enumerate(samples):
        estimator.sample(rtt)
        seen = samples[: index + 1]
        assert estimator.mean_ns is not None
        assert min(seen) <= estimator.mean_ns <= max(seen)
        assert estimator.variation_ns >= 0


def test_a_negative_round_trip_is_misuse() -> None:
    with pytest.raises(LocalProtocolError, match="-1 ns"):
        RoundTripEstimator(*WIDE).sample(-1)


@pytest.mark.parametrize(
    "bounds", [(0, 1, 2, 1), (1, 0, 2, 1), (1, 3, 2, 1), (1, 1, 2, 0), (-5, 1, 2, 1)]
)
def test_impossible_bounds_are_misuse(bounds: tuple[int, int, int, int]) -> None:
    with pytest.raises(LocalProtocolError):
        RoundTripEstimator(*bounds)
