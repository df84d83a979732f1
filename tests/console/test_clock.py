"""The session's clock and its pace."""

import time
from datetime import UTC, datetime, timedelta

from console.clock import SessionClock, next_utc_second, utc_now, utc_seconds


class FakeSource:
    def __init__(self) -> None:
        self.ns = 5_000

    def __call__(self) -> int:
        return self.ns


def test_time_counts_from_the_opening_on() -> None:
    source = FakeSource()
    clock = SessionClock(1.0, source)
    assert clock.now_ns() == 0
    source.ns += 70
    assert clock.now_ns() == 70


def test_pace_scales_both_ways() -> None:
    source = FakeSource()
    clock = SessionClock(4.0, source)
    source.ns += 1_000_000_000
    assert clock.now_ns() == 4_000_000_000
    assert clock.real_s(4_000_000_000) == 1.0


def test_a_wait_is_never_negative() -> None:
    assert SessionClock().real_s(-5) == 0.0


def test_utc_is_now_and_says_so() -> None:
    told = datetime.fromisoformat(utc_now())
    assert told.utcoffset() == timedelta(0)
    assert abs(datetime.now(UTC) - told) < timedelta(seconds=5)
    assert abs(utc_seconds() - told.timestamp()) < 5


def test_the_next_second_is_new_to_each_caller() -> None:
    first = next_utc_second()
    assert time.time() >= first
    assert next_utc_second() > first
