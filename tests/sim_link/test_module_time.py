"""A module's own clock: units, drift, wraps, and the way back for timers."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.module_time import DRIFT_LIMIT_PPM, ModuleTime

S = 1_000_000_000
DRIFTS = st.floats(-DRIFT_LIMIT_PPM, DRIFT_LIMIT_PPM)
TIMES_NS = st.integers(0, 10**16)


def test_it_counts_from_the_boot() -> None:
    time = ModuleTime(3 * S)
    assert time.us(3 * S) == time.ms(3 * S) == 0
    assert time.us(5 * S + 1_234_567) == 2_001_234
    assert time.ms(5 * S + 1_999_999) == 2_001


def test_a_fast_clock_gains_so_much() -> None:
    """40 parts in a million are 3.456 s a day."""
    day_ns = 86_400 * S
    assert ModuleTime(0, 40.0).us(day_ns) - ModuleTime(0).us(day_ns) == pytest.approx(3_456_000)


def test_milliseconds_wrap_at_32_bits_and_microseconds_do_not() -> None:
    time = ModuleTime(0)
    late_ns = (2**32 + 5) * 1_000_000
    assert time.ms(late_ns) == 5
    assert time.us(late_ns) == (2**32 + 5) * 1_000


@given(TIMES_NS, DRIFTS)
def test_it_never_runs_backwards(t_ns: int, drift_ppm: float) -> None:
    time = ModuleTime(0, drift_ppm)
    assert time.us(t_ns) <= time.us(t_ns + 1) <= time.us(t_ns + 10_000)


@given(TIMES_NS, DRIFTS, st.integers(1, 100_000))
def test_a_timer_goes_off_when_its_milliseconds_are_over(
    t_ns: int, drift_ppm: float, wait_ms: int
) -> None:
    time = ModuleTime(0, drift_ppm)
    then_ns = time.after_ns(t_ns, wait_ms)
    passed_us = time.us(then_ns) - time.us(t_ns)
    assert wait_ms * 1_000 <= passed_us <= wait_ms * 1_000 + 5
    assert (time.ms(then_ns) - time.ms(t_ns)) % 2**32 >= wait_ms
