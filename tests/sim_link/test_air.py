"""The shared channel: airtime, collisions, listening, and the throughput of random access.

The throughput laws are those of Abramson (1970), G e^(-2G) without slots, and of slotted access as
given in every textbook since, G e^(-G). They are for infinitely many senders of one frame each.
"""

import math
import random
from collections.abc import Iterator
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.air import OVERHEAD_BYTES, TURNAROUND_NS, Air, Sent

MS = 1_000_000
RATE = 250_000
DATA = bytes(24)
FRAME_NS = 1_024_000
"""(24 + 8) bytes of 8 bits at 250 kbit/s."""


def air(*, listens: bool = False, rate: int = RATE) -> Air:
    return Air(rate, 1, listens=listens)


def all_of(channel: Air) -> Iterator[tuple[int, Sent]]:
    """Everything that is still to be sent, with the time of each end."""
    while (due_ns := channel.next_ns) is not None:
        for sent in channel.advance(due_ns):
            yield due_ns, sent


def test_airtime_by_hand() -> None:
    assert air().airtime_ns(24) == FRAME_NS
    assert air(rate=9600).airtime_ns(64) == 60_000_000  # 72 bytes of 8 bits at 9,600 bit/s
    assert air().airtime_ns(0) == OVERHEAD_BYTES * 8 * 4_000


def test_a_frame_alone_is_clear_and_takes_its_time() -> None:
    channel = air()
    channel.offer(3, DATA, 5 * MS)
    assert channel.next_ns == 5 * MS
    assert channel.advance(5 * MS + FRAME_NS - 1) == []
    assert channel.advance(5 * MS + FRAME_NS) == [Sent(3, DATA, True)]
    assert channel.next_ns is None
    assert channel.busy_ns == channel.delivered_ns == FRAME_NS


@pytest.mark.parametrize(("gap_ns", "clear"), [(0, False), (FRAME_NS - 1, False), (FRAME_NS, True)])
def test_what_overlaps_is_lost_and_what_adjoins_is_not(gap_ns: int, clear: bool) -> None:
    channel = air()
    channel.offer(1, DATA, 0)
    channel.offer(2, DATA, gap_ns)
    assert [sent.clear for _, sent in all_of(channel)] == [clear, clear]


def test_a_long_frame_spoils_each_short_one_within_it() -> None:
    channel = air()
    channel.offer(1, bytes(60), 0)
    for sender in (2, 3):
        channel.offer(sender, b"", (sender - 1) * 500_000)
    ends = list(all_of(channel))
    assert [sent.sender for _, sent in ends] == [2, 3, 1]
    assert not any(sent.clear for _, sent in ends)


def test_frames_of_one_radio_follow_each_other() -> None:
    channel = air()
    for number in range(5):
        channel.offer(7, bytes([number]) * 24, 0)
    assert channel.waiting(7) == 5
    ends = list(all_of(channel))
    assert [sent.data[0] for _, sent in ends] == [0, 1, 2, 3, 4]
    assert all(sent.clear for _, sent in ends)
    assert [later - sooner for (sooner, _), (later, _) in pairwise(ends)] == [FRAME_NS] * 4


def test_who_listens_leaves_room_for_an_answer_between_two_frames() -> None:
    channel = air(listens=True)
    channel.offer(1, DATA, 0)
    channel.offer(1, DATA, 0)
    channel.advance(FRAME_NS)
    channel.offer(2, DATA, FRAME_NS)  # asked by the first, it answers at once
    ends = [(sent.sender, sent.clear) for _, sent in all_of(channel)]
    assert ends == [(2, True), (1, True)]


def test_who_listens_waits_and_nobody_is_spoilt() -> None:
    channel = air(listens=True)
    channel.offer(1, DATA, 0)
    channel.offer(2, DATA, TURNAROUND_NS)
    (first_ns, first), (second_ns, second) = all_of(channel)
    assert first.clear
    assert second.clear
    assert second_ns >= first_ns + FRAME_NS


def test_two_that_begin_before_they_can_hear_each_other_collide() -> None:
    """Asked at one time, each waits for one of 64 turnarounds by its own luck: one pair in 64."""
    spoilt = 0
    for seed in range(640):
        channel = Air(RATE, seed, listens=True)
        for sender in (1, 2):
            channel.offer(sender, DATA, 0, spread=True)
        clear = {sent.clear for _, sent in all_of(channel)}
        assert len(clear) == 1
        spoilt += clear == {False}
    assert 1 <= spoilt <= 25  # 10 expected; 25 is five standard deviations away


@given(
    offers=st.lists(
        st.tuples(st.integers(0, 6), st.integers(0, 30), st.integers(0, 56)), max_size=40
    ),
    listens=st.booleans(),
)
def test_every_frame_is_sent_once_in_its_radios_order(
    offers: list[tuple[int, int, int]], listens: bool
) -> None:
    """And clear ones overlap nobody; the sums of airtime are those of the frames."""
    channel = air(listens=listens)
    offered: dict[int, list[bytes]] = {}
    sent: list[tuple[int, Sent]] = []
    for number, (sender, at_ms, size) in enumerate(sorted(offers, key=lambda each: each[1])):
        while (due_ns := channel.next_ns) is not None and due_ns <= at_ms * MS:
            sent += [(due_ns, each) for each in channel.advance(due_ns)]
        data = bytes([number]) + bytes(size)
        offered.setdefault(sender, []).append(data)
        channel.offer(sender, data, at_ms * MS)
    sent += all_of(channel)
    for sender, frames in offered.items():
        assert [each.data for _, each in sent if each.sender == sender] == frames
    spans = [(end - channel.airtime_ns(len(each.data)), end, each.clear) for end, each in sent]
    for start, end, clear in spans:
        alone = sum(s < end and start < e for s, e, _ in spans) == 1
        assert alone is clear
    assert channel.busy_ns == sum(end - start for start, end, _ in spans)
    assert channel.delivered_ns == sum(end - start for start, end, clear in spans if clear)


def test_what_is_forgotten_is_not_sent_but_what_is_on_the_air_is() -> None:
    channel = air()
    for _ in range(4):
        channel.offer(1, DATA, 0)
    channel.advance(10_000)
    channel.forget(1)
    assert channel.waiting(1) == 1
    assert len(list(all_of(channel))) == 1
    channel.offer(1, DATA, 50 * MS)
    assert len(list(all_of(channel))) == 1


def throughput(load: float, frames: int, *, slotted: bool) -> float:
    """Clear airtime over elapsed time where frames of new senders come as a Poisson process."""
    channel, rng = air(), random.Random(41)
    gap_ns = FRAME_NS / load
    at_ns, last_ns = 0.0, 0
    for sender in range(frames):
        at_ns += rng.expovariate(1.0) * gap_ns
        start_ns = int(-(-at_ns // FRAME_NS)) * FRAME_NS if slotted else int(at_ns)
        channel.advance(start_ns)
        channel.offer(sender, DATA, start_ns)
        last_ns = start_ns
    channel.advance(last_ns + 2 * FRAME_NS)
    return channel.delivered_ns / last_ns


@pytest.mark.parametrize(("load", "frames"), [(0.1, 15_000), (0.5, 60_000), (1.0, 120_000)])
@pytest.mark.parametrize("slotted", [False, True])
def test_random_access_carries_what_the_law_says(load: float, frames: int, slotted: bool) -> None:
    """Within 2 %. Of 120,000 frames at G = 1 some 16,000 are clear, which is good for 1 %."""
    law = load * math.exp(-load if slotted else -2.0 * load)
    assert throughput(load, frames, slotted=slotted) == pytest.approx(law, rel=0.02)


def test_slots_without_contention_fill_the_channel() -> None:
    """Two hundred senders, each in a slot of a frame's airtime and 100 us of guard: 0.91."""
    channel, guard_ns = air(), 100_000
    slot_ns = FRAME_NS + guard_ns
    for turn in range(3):
        for sender in range(200):
            start_ns = (200 * turn + sender) * slot_ns
            channel.advance(start_ns)
            channel.offer(sender, DATA, start_ns)
    end_ns = 600 * slot_ns
    channel.advance(end_ns)
    assert channel.delivered_ns == 600 * FRAME_NS
    assert channel.delivered_ns / end_ns >= 0.9


def test_listening_beats_sending_at_once_under_load() -> None:
    """At G = 1, where sending at once delivers 0.135, listening delivers more than three times as
    much (carrier sense with a short turnaround; Kleinrock and Tobagi 1975)."""
    shares = {}
    for listens in (False, True):
        channel, rng = air(listens=listens), random.Random(5)
        at_ns = 0.0
        for sender in range(4000):
            at_ns += rng.expovariate(1.0) * FRAME_NS
            channel.advance(int(at_ns))
            channel.offer(sender, DATA, int(at_ns))
        shares[listens] = channel.delivered_ns / at_ns
    assert shares[True] > 3.0 * shares[False]
