"""Draws keyed by what they decide: (seed, who, count, purpose) -> a number.

Owns how chance enters the simulation. Knows nothing of modules, channels or time.

A draw depends on its key alone. There is no generator whose state moves on, so it makes no
difference in which order, or on which thread, draws are asked for: a session that ran in real
time and one that ran in virtual time get the same luck. The standard library's ``random``
promises the same stream only for some of its methods; BLAKE2b (RFC 7693) is a fixed function,
and no release can change what it gives.
"""

import struct
from collections.abc import Callable
from hashlib import blake2b
from statistics import NormalDist
from typing import Final

MAX_SEED: Final = (1 << 64) - 1
"""A seed is an unsigned 64-bit number."""

_KEY: Final = struct.Struct("<QQQ")
_FOUR: Final = struct.Struct("<QQQQ")
_TWO_TO_MINUS_53: Final = 2.0**-53
_TWO_TO_MINUS_52: Final = 2.0**-52
_QUANTILE: Final[Callable[[float], float]] = NormalDist().inv_cdf


def word(seed: int, who: int, count: int, purpose: str) -> int:
    """Return 64 uniform bits: BLAKE2b with an 8-byte digest, read little-endian.

    The key is seed, who and count as three little-endian u64, followed by ``purpose`` in
    ASCII. ``who`` and ``count`` are taken modulo 2**64. Raises struct.error for a negative
    number and UnicodeEncodeError for a purpose outside ASCII: both are mistakes of ours.
    """
    key = _KEY.pack(seed, who & MAX_SEED, count & MAX_SEED) + purpose.encode("ascii")
    return int.from_bytes(blake2b(key, digest_size=8).digest(), "little")


def uniform(seed: int, who: int, count: int, purpose: str) -> float:
    """Return a number in [0, 1), a multiple of 2**-53: the upper 53 bits of ``word``."""
    return (word(seed, who, count, purpose) >> 11) * _TWO_TO_MINUS_53


def normal(seed: int, who: int, count: int, purpose: str) -> float:
    """Return a standard normal number: the inverse distribution function of a uniform one.

    The argument is the middle of one of 2**52 equal steps (the upper 52 bits of ``word``), so
    that it is never 0 or 1. One draw gives one number; the method of Box and Muller would need
    two draws and a cosine whose last bit depends on the platform's mathematics library. The
    quantile is algorithm AS 241 (Wichura 1988).
    """
    return _QUANTILE(((word(seed, who, count, purpose) >> 12) + 0.5) * _TWO_TO_MINUS_52)


def four_normals(
    seed: int, who: int, count: int, purpose: str
) -> tuple[float, float, float, float]:
    """Return four independent standard normal numbers for the price of little more than one.

    Keyed as ``word``, from one BLAKE2b digest of 32 bytes, read as four little-endian u64 and
    turned as in ``normal``. The digest's length is a parameter of the hash (RFC 7693, 2.5), so
    none of the four has anything to do with ``normal`` of the same key.
    """
    key = _KEY.pack(seed, who & MAX_SEED, count & MAX_SEED) + purpose.encode("ascii")
    a, b, c, d = _FOUR.unpack(blake2b(key, digest_size=32).digest())
    return (
        _QUANTILE(((a >> 12) + 0.5) * _TWO_TO_MINUS_52),
        _QUANTILE(((b >> 12) + 0.5) * _TWO_TO_MINUS_52),
        _QUANTILE(((c >> 12) + 0.5) * _TWO_TO_MINUS_52),
        _QUANTILE(((d >> 12) + 0.5) * _TWO_TO_MINUS_52),
    )


class Draws:
    """The draws of one subject: a module's, or one direction of one radio path's."""

    __slots__ = ("seed", "who")

    def __init__(self, seed: int, who: int) -> None:
        self.seed = seed
        self.who = who

    def word(self, count: int, purpose: str) -> int:
        """Return 64 uniform bits; see ``word``."""
        return word(self.seed, self.who, count, purpose)

    def uniform(self, count: int, purpose: str) -> float:
        """Return a number in [0, 1); see ``uniform``."""
        return uniform(self.seed, self.who, count, purpose)

    def normal(self, count: int, purpose: str) -> float:
        """Return a standard normal number; see ``normal``."""
        return normal(self.seed, self.who, count, purpose)

    def four_normals(self, count: int, purpose: str) -> tuple[float, float, float, float]:
        """Return four independent standard normal numbers; see ``four_normals``."""
        return four_normals(self.seed, self.who, count, purpose)

    def happens(self, probability: float, count: int, purpose: str) -> bool:
        """Say whether an event of this probability happens; 0 never does and 1 always."""
        return probability > 0.0 and self.uniform(count, purpose) < probability

    def between(self, low: float, high: float, count: int, purpose: str) -> float:
        """Return a number uniform in [low, high)."""
        return low + (high - low) * self.uniform(count, purpose)
