"""The radio path: what it loses, damages, repeats and delays, how often, and the same again."""

import itertools
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.frame import FrameDecoder, frame
from sim_link.radio import MAX_FLIPPED_BITS, Channel, Quality, Way, faintness

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


# --- bursts, spread and range ------------------------------------------------------------


def runs_of_losses(path: Channel, count: int) -> list[int]:
    """Lengths of the runs of lost frames among so many."""
    lost = [not path.offer(FRAME, i) for i in range(count)]
    return [len(list(group)) for gone, group in itertools.groupby(lost) if gone]


@pytest.mark.parametrize(("loss", "burst"), [(0.1, 4.0), (0.3, 8.0), (0.5, 2.0), (0.02, 20.0)])
def test_bursts_have_the_mean_length_and_the_losses_the_mean_part(
    loss: float, burst: float
) -> None:
    """Gilbert (1960): sojourns in the bad state are geometric with mean 1/P(leave), and its
    stationary part is P(enter) / (P(enter) + P(leave)). Runs are independent, so that the mean of n
    of them is good to burst/sqrt(n), and the loss to about loss sqrt(2/n)."""
    count = 40_000
    runs = runs_of_losses(channel(loss=loss, burst=burst), count)
    assert sum(runs) / len(runs) == pytest.approx(burst, abs=4 * burst / math.sqrt(len(runs)))
    assert sum(runs) / count == pytest.approx(loss, rel=4 * math.sqrt(2 / len(runs)))


def test_a_burst_of_one_is_independent_luck() -> None:
    """The mean run of independent losses is 1/(1 - p)."""
    assert history(channel(loss=0.3, burst=1.0)) == history(channel(loss=0.3))
    runs = runs_of_losses(channel(loss=0.3), 20_000)
    assert sum(runs) / len(runs) == pytest.approx(1 / 0.7, rel=0.03)


@pytest.mark.parametrize(("loss", "burst"), [(0.8, 2.0), (0.9, 2.0), (0.6, 1.2)])
def test_a_great_loss_is_kept_though_its_bursts_must_be_longer(loss: float, burst: float) -> None:
    """With good states of one frame each, bursts of loss / (1 - loss) are the shortest."""
    runs = runs_of_losses(channel(loss=loss, burst=burst), 20_000)
    assert sum(runs) / 20_000 == pytest.approx(loss, abs=0.015)
    assert sum(runs) / len(runs) == pytest.approx(loss / (1 - loss), rel=0.06)


@pytest.mark.parametrize("loss", [0.0, 1.0])
def test_bursts_of_nothing_and_of_everything(loss: float) -> None:
    assert all(bool(arrivals) is (loss == 0.0) for arrivals in history(channel(loss=loss, burst=5)))


def test_spread_is_within_its_bounds_and_keeps_the_order() -> None:
    times = [arrivals[0][0] for arrivals in history(channel(spread_ms=25.0, delay_ms=10.0))]
    assert times == sorted(times)
    late = [t_ns - i * 10 * MS for i, t_ns in enumerate(times)]
    assert all(10 * MS <= each <= 37 * MS + MS for each in late)
    assert max(late) - min(late) > 10 * MS


def test_only_a_path_without_faults_is_perfect() -> None:
    assert channel().perfect
    assert channel(burst=9.0).perfect  # bursts of no losses
    for name in ("loss", "damage", "repeat", "reorder", "delay_ms", "spread_ms", "faint"):
        assert not channel(**{name: 0.1}).perfect


def test_range_by_hand() -> None:
    """30 dB a decade: half way out the margin is 9.03 dB, so 1/(1 + 10^(9.03/4)) is lost."""
    assert faintness(100.0, None) == faintness(0.0, 50.0) == 0.0
    assert faintness(50.0, 50.0) == 0.5
    assert faintness(25.0, 50.0) == pytest.approx(1 / (1 + 10 ** (30 * math.log10(2) / 4)))
    assert faintness(25.0, 50.0) == pytest.approx(0.0055, abs=1e-4)
    assert faintness(100.0, 50.0) == 1.0


@given(st.floats(0.1, 500.0), st.floats(1.0, 3.0), st.floats(1.0, 100.0))
def test_further_out_more_is_lost(distance_m: float, further: float, range_m: float) -> None:
    assert faintness(distance_m, range_m) <= faintness(further * distance_m, range_m) <= 1.0


def test_what_is_faint_is_lost_as_often_as_told_whatever_else_is() -> None:
    n = 4000
    lost = sum(not arrivals for arrivals in history(channel(faint=0.4, loss=0.5, burst=4.0), n))
    assert lost / n == pytest.approx(1 - 0.6 * 0.5, abs=0.04)
