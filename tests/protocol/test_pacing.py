"""Pacing: reckoned by hand for plain rates, and against a model of the wire."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.errors import LocalProtocolError
from protocol.pacing import LinePacer

STEADY = settings(derandomize=True, deadline=None)
"""The same examples each time, and no deadline on a busy machine."""

MS = 1_000_000
S = 1_000_000_000


def test_a_byte_is_ten_bits() -> None:
    # 8N1, common practice of the trade: 115,200 baud carry 11,520 bytes a second.
    assert LinePacer(115_200).duration_ns(11_520) == S
    assert LinePacer(10_000).duration_ns(1) == MS


def test_durations_are_rounded_up() -> None:
    # 10 bits at 921,600 baud: 10,850.69 ns.
    assert LinePacer(921_600).duration_ns(1) == 10_851


def test_an_idle_line_is_ready_at_once() -> None:
    pacer = LinePacer(9600)
    assert pacer.ready_ns(64, 5 * S) == 5 * S
    assert pacer.waiting_ns(5 * S) == 0


def test_up_to_ten_milliseconds_may_wait() -> None:
    # 10,000 baud: 1 ms a byte.
    pacer = LinePacer(10_000, ahead_ns=10 * MS)
    pacer.sent(6, 0)
    assert pacer.ready_ns(4, 0) == 0
    assert pacer.ready_ns(5, 0) == 1 * MS
    pacer.sent(4, 0)
    assert pacer.waiting_ns(0) == 10 * MS
    assert pacer.ready_ns(1, 0) == 1 * MS
    assert pacer.ready_ns(10, 0) == 10 * MS


def test_a_frame_longer_than_that_waits_for_an_idle_line() -> None:
    pacer = LinePacer(10_000, ahead_ns=10 * MS)
    pacer.sent(64, 0)
    assert pacer.waiting_ns(0) == 64 * MS
    assert pacer.ready_ns(64, 0) == 64 * MS
    assert pacer.ready_ns(64, 70 * MS) == 70 * MS


def test_the_line_drains_with_time() -> None:
    pacer = LinePacer(10_000)
    pacer.sent(10, 100 * MS)
    assert pacer.waiting_ns(104 * MS) == 6 * MS
    assert pacer.ready_ns(4, 104 * MS) == 104 * MS
    assert pacer.waiting_ns(500 * MS) == 0


def test_idle_time_is_not_saved_up() -> None:
    pacer = LinePacer(10_000)
    pacer.sent(1, 0)
    pacer.sent(10, 60 * S)
    assert pacer.waiting_ns(60 * S) == 10 * MS


def test_what_was_sent_without_asking_counts_as_well() -> None:
    pacer = LinePacer(10_000)
    pacer.sent(10, 0)
    pacer.sent(8, 0)  # an all-stop
    assert pacer.ready_ns(1, 0) == 9 * MS


def test_times_may_begin_anywhere() -> None:
    pacer = LinePacer(10_000)
    assert pacer.ready_ns(1, -S) == -S
    pacer.sent(3, -S)
    assert pacer.waiting_ns(-S) == 3 * MS


def test_no_ahead_at_all_means_one_frame_at_a_time() -> None:
    pacer = LinePacer(10_000, ahead_ns=0)
    pacer.sent(2, 0)
    assert pacer.ready_ns(1, 0) == 2 * MS


@STEADY
@given(
    rate=st.sampled_from([1200, 9600, 57_600, 115_200, 921_600]),
    frames=st.lists(st.tuples(st.integers(1, 64), st.integers(0, 50 * MS)), max_size=60),
)
def test_obeying_it_keeps_the_backlog_short_and_the_wire_busy(
    rate: int, frames: list[tuple[int, int]]
) -> None:
    """Against a wire modelled in whole bits: bytes leave at the rate while there are any."""
    pacer = LinePacer(rate)
    t_ns = 0
    wire_idle_ns = 0.0
    for n_bytes, pause_ns in frames:
        asked_ns = t_ns + pause_ns
        t_ns = pacer.ready_ns(n_bytes, asked_ns)
        own_ns = n_bytes * 10 * S / rate
        backlog_ns = max(0.0, wire_idle_ns - t_ns) + own_ns
        assert backlog_ns <= max(10 * MS, own_ns) + 1
        if t_ns > asked_ns:  # made to wait: then the allowance is used up, to the rounding
            assert backlog_ns >= max(10 * MS, own_ns) - 100
        pacer.sent(n_bytes, t_ns)
        wire_idle_ns = max(wire_idle_ns, t_ns) + own_ns


@STEADY
@given(st.integers(1, 64), st.integers(0, S))
def test_ready_is_never_in_the_past(n_bytes: int, t_ns: int) -> None:
    pacer = LinePacer(9600)
    pacer.sent(64, 0)
    assert pacer.ready_ns(n_bytes, t_ns) >= t_ns


@pytest.mark.parametrize(("rate", "ahead"), [(0, 1), (-9600, 1), (9600, -1)])
def test_impossible_lines_are_misuse(rate: int, ahead: int) -> None:
    with pytest.raises(LocalProtocolError, match="cannot pace"):
        LinePacer(rate, ahead)
