"""The sliding window of counters, against a set that remembers everything."""

import random

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.replay_window import WINDOW, ReplayWindow


def test_each_counter_is_taken_once() -> None:
    window = ReplayWindow()
    assert [window.accept(counter) for counter in (1, 2, 2, 1, 3)] == [
        True, True, False, False, True,
    ]  # fmt: skip


def test_what_was_missing_is_taken_within_the_window() -> None:
    window = ReplayWindow()
    window.accept(100)
    assert window.accept(100 - WINDOW + 1)
    assert not window.accept(100 - WINDOW)
    assert window.too_old(100 - WINDOW)
    assert not window.too_old(100 - WINDOW + 1)


def test_what_came_before_the_first_edge_counts_as_seen() -> None:
    window = ReplayWindow(50)
    assert not any(window.accept(counter) for counter in range(51))
    assert window.accept(51)


@pytest.mark.parametrize("jump", [1, WINDOW - 1, WINDOW, WINDOW + 1, 1 << 32, 1 << 63])
def test_the_edge_may_jump(jump: int) -> None:
    window = ReplayWindow()
    window.accept(1)
    assert window.accept(1 + jump)
    assert not window.accept(1 + jump)
    assert not window.accept(1)


@given(st.lists(st.integers(1, 200), max_size=300))
def test_nothing_is_taken_twice_and_nothing_new_within_the_window_is_refused(
    counters: list[int],
) -> None:
    window, taken, edge = ReplayWindow(), set[int](), 0
    for counter in counters:
        expected = counter not in taken and counter > edge - WINDOW and counter > 0
        assert window.accept(counter) == expected
        if expected:
            taken.add(counter)
            edge = max(edge, counter)


def test_honest_counters_in_any_order_inside_the_window_are_all_taken() -> None:
    rng = random.Random(1)
    window = ReplayWindow()
    for start in range(1, 5000, WINDOW // 2):
        block = list(range(start, start + WINDOW // 2))
        rng.shuffle(block)
        assert all(window.accept(counter) for counter in block)
