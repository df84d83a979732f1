"""The radio path: what it loses, damages, repeats and delays, how often, and the same again."""

import itertools
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.frame import FrameDecoder, frame
from sim_link.radio import MAX_FLIPPED_BITS, Channel, Quality, Way

MS = 1_000_000
FRAME = frame(bytes(range(1, 40)))
CHANCES = st.floats(0.0, 1.0)


def channel(seed: int = 1, link: int = 3, way: Way = Way.TO_MODULE, **quality: float) -> Channel:
    return Channel(Quality(**quality), seed, link, way)


def history(path: Channel, count: int = 60) -> list[list[tuple[int, bytes]]]:
    return [path.offer(FRAME, i * 10 * MS) for i in range(count)]


def test_a_good_path_changes_nothing() -> None:
    assert channel().offer(FRAME, 17) == [(17, FRAME)]


def test_loss_of_one_lets_nothing_through() -> None:
    assert not any(history(channel(loss=1.0)))


@pytest.mark.parametrize("chance", [0.05, 0.3])
def test_loss_is_as_frequent_as_told(chance: float) -> None:
    n = 3000
    lost = sum(not arrivals for arrivals in history(channel(loss=chance), n))
    assert abs(lost - n * chance) < 4 * math.sqrt(n * chance * (1 - chance))


def test_repeat_of_one_brings_every_frame_twice_and_the_second_later() -> None:
    for sent, arrivals in enumerate(history(channel(repeat=1.0))):
        (first_ns, first), (second_ns, second) = arrivals
        assert first == second == FRAME
        assert first_ns == sent * 10 * MS <= second_ns


def test_copies_of_a_repeated_frame_are_lost_each_by_itself() -> None:
    counts = {len(arrivals) for arrivals in history(channel(repeat=1.0, loss=0.5), 200)}
    assert counts == {0, 1, 2}


@given(st.integers(0, 1000), st.binary(min_size=1, max_size=40).filter(lambda b: b != b""))
def test_damage_turns_one_to_a_few_bits_and_is_always_noticed(link: int, payload: bytes) -> None:
    sent = frame(payload)
    ((_, got),) = channel(link=link, damage=1.0).offer(sent, 0)
    assert len(got) == len(sent)
    turned = sum((a ^ b).bit_count() for a, b in zip(sent, got, strict=True))
    assert 1 <= turned <= MAX_FLIPPED_BITS
    # A delimiter after it, in case its own was hit: the payload never comes out whole, unless
    # nothing but that delimiter was turned and the next one ended the same frame.
    found = [each for each in FrameDecoder().feed(got + b"\0") if isinstance(each, bytes)]
    assert all(each != payload for each in found) or got[:-1] == sent[:-1]


def test_without_reordering_frames_stay_in_order_whatever_the_delay() -> None:
    path = channel(delay_ms=80.0)
    times = [path.offer(FRAME, i * MS)[0][0] for i in range(300)]
    assert times == sorted(times)
    for sent, arrival_ns in enumerate(times):
        assert 80 * MS <= arrival_ns - sent * MS <= 97 * MS


def test_reordered_frames_are_overtaken() -> None:
    path = channel(reorder=0.3)
    times = [path.offer(FRAME, i * 2 * MS)[0][0] for i in range(300)]
    overtaken = sum(later < earlier for earlier, later in itertools.pairwise(times))
    assert overtaken > 30
    assert all(0 <= t - i * 2 * MS <= 60 * MS for i, t in enumerate(times))


@given(st.integers(0, 99), CHANCES, CHANCES, CHANCES, CHANCES)
def test_the_same_seed_brings_the_same(
    seed: int, loss: float, damage: float, repeat: float, reorder: float
) -> None:
    quality = {"loss": loss, "damage": damage, "repeat": repeat, "reorder": reorder}
    one = history(channel(seed, delay_ms=5.0, **quality), 20)
    assert one == history(channel(seed, delay_ms=5.0, **quality), 20)


def test_seed_link_and_direction_each_change_the_luck() -> None:
    paths = [
        channel(1, 3, loss=0.5),
        channel(2, 3, loss=0.5),
        channel(1, 4, loss=0.5),
        channel(1, 3, Way.TO_CONSOLE, loss=0.5),
    ]
    patterns = [tuple(bool(arrivals) for arrivals in history(path)) for path in paths]
    assert len(set(patterns)) == len(patterns)


def test_luck_depends_on_the_frame_count_and_not_on_the_time() -> None:
    early, late = channel(loss=0.4), channel(loss=0.4)
    pattern = [bool(early.offer(FRAME, i)) for i in range(50)]
    assert pattern == [bool(late.offer(FRAME, 999 * i)) for i in range(50)]


def test_an_empty_damaged_frame_does_not_hang() -> None:
    assert len(channel(damage=1.0).offer(b"\0", 0)[0][1]) == 1
