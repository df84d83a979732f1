"""Draws: the documented key and hash by hand, published quantiles, and sanity of many draws."""

import hashlib
import itertools
import math
import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.randomness import MAX_SEED, Draws, four_normals, normal, uniform, word

SEEDS = st.integers(0, MAX_SEED)
COUNTS = st.integers(0, MAX_SEED)


def by_hand(seed: int, who: int, count: int, purpose: str) -> int:
    """The formula of the docstring, spelt out byte by byte."""
    key = b"".join(number.to_bytes(8, "little") for number in (seed, who, count))
    return int.from_bytes(hashlib.blake2b(key + purpose.encode(), digest_size=8).digest(), "little")


def test_hash_is_blake2b_of_rfc_7693() -> None:
    # RFC 7693, appendix A: BLAKE2b-512 of "abc". So hashlib is the function that we mean.
    expected = (
        "ba80a53f981c4d0d6a2797b69f12f6e94c212f14685ac4b74b12bb6fdbffa2d1"
        "7d87c5392aab792dc252d5de4533cc9518d38aa8dbf1925ab92386edd4009923"
    )
    assert hashlib.blake2b(b"abc").hexdigest() == expected


@given(SEEDS, COUNTS, COUNTS, st.text(st.characters(max_codepoint=126, min_codepoint=32)))
def test_word_is_the_documented_formula(seed: int, who: int, count: int, purpose: str) -> None:
    assert word(seed, who, count, purpose) == by_hand(seed, who, count, purpose)


@given(SEEDS, COUNTS, COUNTS)
def test_uniform_is_the_upper_53_bits(seed: int, who: int, count: int) -> None:
    value = uniform(seed, who, count, "x")
    assert 0.0 <= value < 1.0
    assert value == (by_hand(seed, who, count, "x") >> 11) / 2**53


def test_each_part_of_the_key_matters() -> None:
    keys = [(1, 2, 3, "a"), (2, 2, 3, "a"), (1, 3, 3, "a"), (1, 2, 4, "a"), (1, 2, 3, "b")]
    assert len({word(*key) for key in keys}) == len(keys)


def test_order_of_asking_does_not_matter() -> None:
    draws = Draws(7, 99)
    forward = [draws.uniform(count, "p") for count in range(50)]
    backward = [draws.uniform(count, "p") for count in reversed(range(50))]
    assert forward == backward[::-1]


def test_normal_has_published_quantiles(monkeypatch: pytest.MonkeyPatch) -> None:
    # Table of the standard normal distribution: the 97.5 % point is 1.95996, the 84.134 %
    # point 1.0000, the median 0 (any handbook; here to five figures, from memory).
    for part, quantile in ((0.975, 1.95996), (0.8413447, 1.0), (0.5, 0.0), (0.025, -1.95996)):
        monkeypatch.setattr("sim_link.randomness.word", lambda *key, part=part: int(part * 2**64))
        assert normal(1, 2, 3, "x") == pytest.approx(quantile, abs=1e-5)


def test_normal_is_finite_and_symmetrical_at_both_ends(monkeypatch: pytest.MonkeyPatch) -> None:
    ends = []
    for bits in (0, MAX_SEED):
        monkeypatch.setattr("sim_link.randomness.word", lambda *key, bits=bits: bits)
        ends.append(normal(1, 2, 3, "x"))
    assert math.isfinite(ends[0])
    assert ends[0] == pytest.approx(-ends[1])


def test_uniform_draws_fill_bins_evenly() -> None:
    # Chi-square with 63 degrees of freedom: its 99.9 % point is 103.4, its 0.1 % point 32.
    bins = [0] * 64
    for count in range(6400):
        bins[int(uniform(11, 5, count, "bins") * 64)] += 1
    assert 32 < sum((n - 100) ** 2 / 100 for n in bins) < 103.4


def test_neighbouring_counts_do_not_go_together() -> None:
    values = [uniform(3, 1, count, "pairs") - 0.5 for count in range(4000)]
    pairs = itertools.pairwise(values)
    correlation = sum(a * b for a, b in pairs) / sum(a * a for a in values)
    assert abs(correlation) < 4 / math.sqrt(len(values))


def test_normal_draws_have_the_right_moments() -> None:
    n = 5000
    values = [normal(21, 8, count, "moments") for count in range(n)]
    mean = sum(values) / n
    variance = sum((v - mean) ** 2 for v in values) / n
    skew = sum((v - mean) ** 3 for v in values) / n
    kurtosis = sum((v - mean) ** 4 for v in values) / n
    # Four standard errors: 1/sqrt(n), sqrt(2/n), sqrt(15/n), sqrt(96/n).
    assert abs(mean) < 4 / math.sqrt(n)
    assert abs(variance - 1) < 4 * math.sqrt(2 / n)
    assert abs(skew) < 4 * math.sqrt(15 / n)
    assert abs(kurtosis - 3) < 4 * math.sqrt(96 / n)


@given(SEEDS, COUNTS, COUNTS)
def test_four_normals_are_the_quantiles_of_one_digest(seed: int, who: int, count: int) -> None:
    key = b"".join(number.to_bytes(8, "little") for number in (seed, who, count)) + b"x"
    words = struct.unpack("<4Q", hashlib.blake2b(key, digest_size=32).digest())
    drawn = four_normals(seed, who, count, "x")
    for value, bits in zip(drawn, words, strict=True):
        # The distribution function brings the quantile back: an independent formula for it.
        assert 0.5 * math.erfc(-value / math.sqrt(2)) == pytest.approx(bits / 2**64, abs=1e-9)


def test_each_part_of_the_key_matters_to_the_four_and_none_is_the_single_one() -> None:
    keys = [(1, 2, 3, "a"), (2, 2, 3, "a"), (1, 3, 3, "a"), (1, 2, 4, "a"), (1, 2, 3, "b")]
    drawn = [each for key in keys for each in (*four_normals(*key), normal(*key))]
    assert len(set(drawn)) == 5 * len(keys)
    assert Draws(1, 2).four_normals(3, "a") == four_normals(1, 2, 3, "a")


def test_the_four_have_the_right_moments_and_do_not_go_together() -> None:
    n = 4000
    columns = list(zip(*(four_normals(9, 4, count, "m") for count in range(n)), strict=True))
    for column in columns:
        mean = sum(column) / n
        assert abs(mean) < 4 / math.sqrt(n)
        assert abs(sum((v - mean) ** 2 for v in column) / n - 1) < 4 * math.sqrt(2 / n)
    for one, other in itertools.combinations(columns, 2):
        assert abs(sum(a * b for a, b in zip(one, other, strict=True)) / n) < 4 / math.sqrt(n)


def test_happens_as_often_as_told() -> None:
    draws = Draws(5, 5)
    assert not any(draws.happens(0.0, count, "never") for count in range(100))
    assert all(draws.happens(1.0, count, "always") for count in range(100))
    hits = sum(draws.happens(0.3, count, "some") for count in range(4000))
    assert abs(hits - 1200) < 4 * math.sqrt(4000 * 0.3 * 0.7)


@given(st.floats(-1e6, 1e6), st.floats(0, 1e6))
def test_between_keeps_its_bounds(low: float, width: float) -> None:
    assert low <= Draws(1, 1).between(low, low + width, 4, "b") <= low + width


def test_who_and_count_wrap_at_64_bits() -> None:
    assert word(1, 1 << 64, 3, "x") == word(1, 0, 3, "x")
    assert word(1, 2, (1 << 64) + 3, "x") == word(1, 2, 3, "x")
