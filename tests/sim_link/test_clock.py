"""Fleet time: scaled by the pace, and waits scaled back."""

import pytest

from sim_link.clock import PacedClock

S = 1_000_000_000


@pytest.fixture
def computer(monkeypatch: pytest.MonkeyPatch) -> list[int]:
    """The computer's clock in nanoseconds, set by the test."""
    now = [50 * S]
    monkeypatch.setattr("time.monotonic_ns", lambda: now[0])
    return now


@pytest.mark.parametrize("pace", [1.0, 10.0, 0.25])
def test_fleet_time_starts_at_nought_and_runs_at_the_pace(computer: list[int], pace: float) -> None:
    clock = PacedClock(pace)
    assert clock.now_ns() == 0
    computer[0] += 8 * S
    assert clock.now_ns() == int(8 * S * pace)


def test_waits_are_the_computers_seconds(computer: list[int]) -> None:
    clock = PacedClock(10.0)
    assert clock.wait_s(5 * S, 60.0) == pytest.approx(0.5, abs=1e-3)
    assert clock.wait_s(5 * S, 0.2) == 0.2
    assert clock.wait_s(None, 0.3) == 0.3


def test_what_has_passed_needs_no_wait(computer: list[int]) -> None:
    clock = PacedClock(1.0)
    computer[0] += S
    assert clock.wait_s(S, 1.0) == 0.0
    assert clock.wait_s(0, 1.0) == 0.0


def test_after_the_wait_the_time_has_come(computer: list[int]) -> None:
    clock = PacedClock(3.7)
    due_ns = 1_234_567_891
    computer[0] += int(clock.wait_s(due_ns, 60.0) * 1e9)
    assert clock.now_ns() >= due_ns
