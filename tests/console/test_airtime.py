"""The plan of a channel: no two slots overlap, the duty is kept, telemetry yields, commands not."""

from math import gcd

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.airtime import (
    EVERYDAY_DUTY_PERCENT,
    LONGEST_PERIOD_MS,
    AirPlan,
    Channel,
    Lengths,
    plan,
)
from console.errors import InputError

MS = 1_000_000
TELEMETRY_BYTES = 29
SEAL_BYTES = 16


def lengths(frame_ms: float = 10.0, guard_ms: float = 2.0, command_ms: float = 25.0) -> Lengths:
    return Lengths(int(frame_ms * MS), int(guard_ms * MS), int(command_ms * MS))


def overlap(made: AirPlan, one: int, other: int) -> bool:
    """Whether two slots ever meet, whatever their periods: two progressions come as near as their
    phases' difference modulo the greatest common divisor of the periods."""
    left, right = made.places[one], made.places[other]
    common = gcd(left.period_ms, right.period_ms)
    apart = (right.phase_ms - left.phase_ms) % common
    return apart < made.slot_ms or common - apart < made.slot_ms


# -- by hand ---------------------------------------------------------------------------------


def test_a_frame_on_the_air_by_hand() -> None:
    """29 bytes of payload, 4 of check, 1 of stuffing, 1 delimiter, 8 that the radio puts before:
    43 * 8 / 19,200 = 17.917 ms."""
    assert Channel(19_200).frame_ns(TELEMETRY_BYTES) == 17_916_667


def test_eight_modules_at_two_a_second_as_asked() -> None:
    """Slots of 12 ms: 96 ms of 500, so 404 are free, which is 16 times 25; but eight bundles are
    the most, with gaps of 50 and 51 ms."""
    made = plan([500] * 8, lengths(), 25.0)
    assert (made.period_ms, made.asked_ms, made.slot_ms, made.slowed) == (500, 500, 12, False)
    assert [each.phase_ms for each in made.places] == [0, 63, 126, 189, 252, 314, 376, 438]
    assert made.gaps_ms == (51, 51, 51, 51, 50, 50, 50, 50)
    assert made.load == pytest.approx(0.16)
    assert made.gap_share == pytest.approx(404 / 500)


def test_a_channel_that_cannot_carry_it_slows_telemetry() -> None:
    """200 frames of 10 ms in a quarter of the time: 8 s."""
    made = plan([500] * 200, lengths(), 25.0)
    assert (made.period_ms, made.asked_ms, made.slowed) == (8_000, 500, True)
    assert made.load == pytest.approx(0.25)
    assert sum(made.gaps_ms) == 8_000 - 200 * 12
    assert min(made.gaps_ms) >= 25


def test_a_channel_may_be_filled_with_slots() -> None:
    made = plan([20] * 200, lengths(), 100.0)
    assert (made.period_ms, made.gaps_ms) == (2_400, (0,))
    assert made.load == pytest.approx(10 / 12)


def test_who_asks_for_less_gets_a_multiple() -> None:
    made = plan([500, 1_000, 1_700, 60_000], lengths(), 25.0)
    assert [each.period_ms for each in made.places] == [500, 1_000, 1_500, 60_000]
    assert made.load == pytest.approx(10 / 500 + 10 / 1_000 + 10 / 1_500 + 10 / 60_000)


def test_more_than_the_longest_period_holds() -> None:
    """A slow channel: frames of 280 ms and a duty of 1 % let 2 of 3 report."""
    made = plan([1_000] * 3, lengths(280.0, 5.0), 1.0)
    assert (len(made.places), made.seldom, made.slowed) == (2, 1, True)
    assert made.period_ms <= LONGEST_PERIOD_MS


@pytest.mark.parametrize(("rate", "duty"), [(0, 25.0), (-1, 25.0), (9_600, 0.0), (9_600, 101.0)])
def test_what_no_channel_has_is_refused(rate: int, duty: float) -> None:
    with pytest.raises(InputError):
        Channel(rate, duty)


def test_the_everyday_duty_leaves_most_of_the_time_to_others() -> None:
    assert Channel(9_600).duty_percent == EVERYDAY_DUTY_PERCENT == 25.0


def test_a_sealed_frame_is_longer() -> None:
    channel = Channel(80_000)
    sealed_ns = channel.frame_ns(TELEMETRY_BYTES + SEAL_BYTES)
    assert sealed_ns - channel.frame_ns(TELEMETRY_BYTES) == SEAL_BYTES * 8 * 10**9 // 80_000


# -- properties ------------------------------------------------------------------------------

WISHES = st.lists(st.integers(20, 60_000), min_size=1, max_size=40)
LENGTHS = st.builds(lengths, st.floats(0.2, 300.0), st.floats(0.0, 20.0), st.floats(0.0, 500.0))
DUTIES = st.floats(0.5, 100.0)


@given(WISHES, LENGTHS, DUTIES)
def test_no_two_slots_ever_overlap(asked: list[int], times: Lengths, duty: float) -> None:
    made = plan(asked, times, duty)
    assert made.slot_ms * MS >= times.frame_ns + times.guard_ns
    for one in range(len(made.places)):
        for other in range(one):
            assert not overlap(made, one, other)


@given(WISHES, LENGTHS, DUTIES)
def test_the_duty_is_never_exceeded_and_all_fit(
    asked: list[int], times: Lengths, duty: float
) -> None:
    made = plan(asked, times, duty)
    assert made.load <= duty / 100 * (1 + 1e-9)
    assert len(made.places) + made.seldom == len(asked)
    for place in made.places:
        assert 0 <= place.phase_ms <= made.period_ms - made.slot_ms
        assert place.period_ms % made.period_ms == 0
        assert place.period_ms <= LONGEST_PERIOD_MS


@given(WISHES, LENGTHS, DUTIES)
def test_a_period_is_as_short_as_asked_or_as_the_channel_lets(
    asked: list[int], times: Lengths, duty: float
) -> None:
    """A millisecond less, and either the slots or the duty would not fit; nobody reports more
    often than it was asked to, and nobody less often without need."""
    made = plan(asked, times, duty)
    count = len(made.places)
    if made.period_ms > made.asked_ms and count:
        less_ms = made.period_ms - 1
        over = count * times.frame_ns > duty / 100 * less_ms * MS * (1 - 1e-9)
        assert count * made.slot_ms > less_ms or over
    for wish_ms, place in zip(asked, made.places, strict=False):
        assert place.period_ms <= max(wish_ms, made.period_ms) < place.period_ms + made.period_ms


@given(WISHES, LENGTHS, DUTIES)
def test_what_is_in_no_slot_is_in_gaps_with_room_for_commands(
    asked: list[int], times: Lengths, duty: float
) -> None:
    made = plan(asked, times, duty)
    free_ms = made.period_ms - len(made.places) * made.slot_ms
    assert sum(made.gaps_ms) == free_ms
    if len(made.gaps_ms) > 1:
        assert min(made.gaps_ms) * MS >= times.command_ns
    assert 0.0 <= made.gap_share <= 1.0
