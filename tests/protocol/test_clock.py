"""The estimate of a module's clock: the arithmetic, and a bound that is honest and tight."""

import random
from dataclasses import dataclass

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.clock import (
    DRIFT_LIMIT_PPM,
    SAMPLES_KEPT,
    ClockSample,
    ModuleClock,
    reduce_timestamps,
)
from protocol.errors import LocalProtocolError, RemoteProtocolError

MS = 1_000_000
SECOND = 1_000_000_000
RESOLUTION_NS = 1_000


def test_the_formulas_of_rfc_5905_section_8() -> None:
    # theta = ((T2-T1)+(T3-T4))/2, delta = (T4-T1)-(T3-T2); the figures are worked by hand:
    # T1 100, T2 102.53, T3 102.54, T4 100.08 give theta 2.495 s and delta 0.07 s.
    taken = reduce_timestamps(100 * SECOND, 102_530 * MS, 102_540 * MS, 100_080 * MS)
    assert taken == ClockSample(100_040 * MS, 2_495 * MS, 70 * MS)


@pytest.mark.parametrize(
    "times_ms", [(0, 100, 99, 50), (0, 100, 160, 50), (50, 100, 100, 0)], ids=str
)
def test_timestamps_out_of_order_are_refused_and_change_nothing(
    times_ms: tuple[int, int, int, int],
) -> None:
    clock = ModuleClock(RESOLUTION_NS)
    with pytest.raises(RemoteProtocolError):
        clock.sample(*(each * MS for each in times_ms))
    assert not clock.known(0, SECOND)


def test_nothing_is_known_before_the_first_sample() -> None:
    clock = ModuleClock(RESOLUTION_NS)
    assert not clock.known(0, 3600 * SECOND)
    for ask in (clock.offset_ns, clock.bound_ns, clock.module_time_ns, clock.console_time_ns):
        with pytest.raises(LocalProtocolError, match="not known"):
            ask(0)


def test_negative_settings_are_misuse() -> None:
    with pytest.raises(LocalProtocolError):
        ModuleClock(-1)
    with pytest.raises(LocalProtocolError):
        ModuleClock(0, -1)


def test_one_sample_by_hand() -> None:
    clock = ModuleClock(RESOLUTION_NS, drift_limit_ppm=100)
    clock.sample(0, 1_000 * MS + 5 * MS, 1_000 * MS + 5 * MS, 10 * MS)
    assert clock.offset_ns(5 * MS) == 1_000 * MS
    # half of 10 ms, 100 ppm of the 10 ms of the exchange, and the resolution
    assert clock.bound_ns(5 * MS) == 5 * MS + 1_000 + RESOLUTION_NS
    # ten seconds later: 100 ppm of them more
    assert clock.bound_ns(5 * MS + 10 * SECOND) == 5 * MS + 1_000 + MS + RESOLUTION_NS
    assert clock.module_time_ns(7 * MS) == 1_007 * MS
    assert clock.console_time_ns(1_007 * MS) == 7 * MS
    assert clock.known(5 * MS, 6 * MS)
    assert not clock.known(5 * MS, 5 * MS)


def test_the_shortest_round_trip_counts_until_it_is_too_old() -> None:
    clock = ModuleClock(0, drift_limit_ppm=100)
    clock.sample(0, 1 * MS, 1 * MS, 2 * MS)
    clock.sample(1 * SECOND, 1 * SECOND + 9 * MS, 1 * SECOND + 9 * MS, 1 * SECOND + 10 * MS)
    assert clock.offset_ns(1 * SECOND) == 0
    # 4 ms of half round trip are worth 40 s at 100 ppm
    assert clock.offset_ns(30 * SECOND) == 0
    assert clock.offset_ns(60 * SECOND) == 0 or clock.bound_ns(60 * SECOND) < 11 * MS


def test_only_the_last_eight_are_kept() -> None:
    clock = ModuleClock(0)
    clock.sample(0, 0, 0, 0)
    assert clock.bound_ns(0) == 0
    for count in range(1, SAMPLES_KEPT + 1):
        clock.sample(count * MS, count * MS + 3 * MS, count * MS + 3 * MS, (count + 6) * MS)
    assert clock.bound_ns(14 * MS) >= 3 * MS


def test_void_forgets_all() -> None:
    clock = ModuleClock(RESOLUTION_NS)
    clock.sample(0, 5, 5, 10)
    assert clock.known(0, SECOND)
    clock.void()
    assert not clock.known(0, SECOND)
    assert clock.drift_ppm == 0.0


# -- honest and tight --------------------------------------------------------------------------


@dataclass
class Truth:
    """A module's true clock: set off, and running so many ppm fast."""

    offset_ns: int
    drift_ppm: float

    def module_ns(self, console_ns: int) -> int:
        return console_ns + self.offset_ns + round(self.drift_ppm * console_ns / 1e6)


@dataclass
class Score:
    """How often the truth lay within the bound, and how often the bound was tight."""

    looks: int = 0
    honest: int = 0
    tight: int = 0


def simulate(truth: Truth, seed: int, asymmetry: float, steps: int = 600) -> Score:
    """Probe about once a second over delays with a long tail; look in between.

    ``asymmetry`` 1: all of the extra delay falls on the way there.
    """
    rng = random.Random(seed)
    clock = ModuleClock(RESOLUTION_NS)
    score = Score()
    t_ns = 0
    delays: list[tuple[int, int]] = []
    for _ in range(steps):
        t_ns += round(SECOND * (0.5 + rng.random()))
        extra = rng.expovariate(1 / (20 * MS))
        there, back = 2 * MS + round(extra * asymmetry), 2 * MS + round(extra * (1 - asymmetry))
        hold = round(3 * MS * rng.random())
        t2 = truth.module_ns(t_ns + there) // 1000 * 1000
        t3 = truth.module_ns(t_ns + there + hold) // 1000 * 1000
        t4 = t_ns + there + hold + back
        clock.sample(t_ns, t2, t3, t4)
        delays = [*delays, (t_ns, there + back)][-SAMPLES_KEPT:]
        look_ns = t4 + round(SECOND * rng.random())
        error_ns = abs(clock.module_time_ns(look_ns) - truth.module_ns(look_ns))
        bound_ns = clock.bound_ns(look_ns)
        begun_ns, shortest_ns = min(delays, key=lambda each: each[1])
        allowed_ns = DRIFT_LIMIT_PPM * (look_ns - begun_ns) / 1e6
        score.looks += 1
        score.honest += error_ns <= bound_ns
        # 2 us more: the module's timestamps are cut to microseconds
        score.tight += bound_ns <= shortest_ns / 2 + allowed_ns + RESOLUTION_NS + 2_000
    return score


@pytest.mark.parametrize("asymmetry", [0.0, 0.5, 1.0])
@pytest.mark.parametrize("drift_ppm", [-100.0, 0.0, 37.5, 100.0])
def test_the_truth_lies_within_a_tight_bound(asymmetry: float, drift_ppm: float) -> None:
    score = simulate(Truth(-5_000 * SECOND, drift_ppm), 11, asymmetry)
    assert score.honest >= 0.99 * score.looks
    assert score.tight == score.looks


@pytest.mark.parametrize("drift_ppm", [-80.0, 55.0])
def test_the_drift_is_found(drift_ppm: float) -> None:
    truth = Truth(123 * SECOND, drift_ppm)
    clock = ModuleClock(RESOLUTION_NS)
    rng = random.Random(3)
    for second in range(0, 900, 2):
        t_ns = second * SECOND
        there, back = (2 * MS + round(5 * MS * rng.random()) for _ in range(2))
        heard = truth.module_ns(t_ns + there)
        clock.sample(t_ns, heard, heard, t_ns + there + back)
    assert clock.drift_ppm == pytest.approx(drift_ppm, abs=6)
    # With the drift known, ten minutes of silence cost less than the limit would say.
    later_ns = 900 * SECOND + 600 * SECOND
    error_ns = abs(clock.module_time_ns(later_ns) - truth.module_ns(later_ns))
    assert error_ns <= clock.bound_ns(later_ns) < 600 * SECOND * DRIFT_LIMIT_PPM // 1_000_000


def test_a_drift_beyond_the_limit_is_the_one_thing_it_cannot_bound() -> None:
    assert simulate(Truth(0, 100.0), 5, 1.0).honest == 600
    beyond = ModuleClock(RESOLUTION_NS, drift_limit_ppm=10)
    beyond.sample(0, 2 * MS, 2 * MS, 4 * MS)
    truth = Truth(0, 500.0)
    look_ns = 60 * SECOND
    assert abs(beyond.module_time_ns(look_ns) - truth.module_ns(look_ns)) > beyond.bound_ns(look_ns)


@given(
    offset_ns=st.integers(-(10**15), 10**15),
    there_ns=st.integers(0, 10**9),
    back_ns=st.integers(0, 10**9),
    hold_ns=st.integers(0, 10**8),
    t1_ns=st.integers(0, 10**14),
)
def test_whatever_the_delays_the_truth_is_within_half_a_round_trip(
    offset_ns: int, there_ns: int, back_ns: int, hold_ns: int, t1_ns: int
) -> None:
    heard = t1_ns + there_ns + offset_ns
    answered = heard + hold_ns
    t4_ns = t1_ns + there_ns + hold_ns + back_ns
    taken = reduce_timestamps(t1_ns, heard, answered, t4_ns)
    assert taken.delay_ns == there_ns + back_ns
    assert abs(taken.offset_ns - offset_ns) <= (taken.delay_ns + 1) // 2


@given(st.integers(-(10**14), 10**14), st.integers(0, 10**12))
def test_there_and_back_is_the_same_time(offset_ns: int, console_ns: int) -> None:
    clock = ModuleClock(0)
    clock.sample(0, offset_ns, offset_ns, 0)
    assert clock.console_time_ns(clock.module_time_ns(console_ns)) == console_ns
