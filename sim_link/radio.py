"""The radio path to or from one module, one direction: it loses, damages, repeats, delays.

Owns what a bad link does to frames. Knows nothing of what is in them, of line rates (line.py), or
of who else is on the air (air.py). A broadcast takes one path a module, so each hears it or not by
its own luck. All luck is keyed by the path's count of frames, never by time.
"""

import math
from dataclasses import dataclass
from enum import IntEnum
from typing import Final

from sim_link.randomness import Draws

MAX_FLIPPED_BITS: Final = 5
"""A damaged frame has one to so many bits turned over."""

_JITTER: Final = 0.2
"""Part of the delay by which a frame may come later, in order."""
_LATE_NS: Final = 60_000_000
"""A reordered frame comes up to this much later, past its successors."""
_LATE_AT_LEAST_NS: Final = 5_000_000
_ECHO_NS: Final = 400_000_000
"""The second copy of a repeated frame comes up to this much later: after the answer, and after
resends, where it is worst for at-most-once."""


_EDGE_dB: Final = 4.0
"""Margin in which the part of frames lost falls to a tenth."""
_SLOPE_dB: Final = 30.0
"""Path loss a decade of distance: an exponent of 3, as indoors (common practice of the trade)."""
_DEAF_PARTS: Final = 2.0
"""From so many times the range on nothing is heard."""


class Way(IntEnum):
    """The direction of a channel, as a key of its draws."""

    TO_MODULE = 0
    TO_CONSOLE = 1


@dataclass(frozen=True, slots=True)
class Quality:
    """How bad a path is: probabilities of 0 to 1 a frame, and the delay of each in ms.

    ``burst`` is the mean number of frames lost in a row: losses then come as in the two-state
    chain of Gilbert (1960) and Elliott (1963), all frames lost in the bad state and none in the
    good one. 1: each frame has its own luck. A loss of p takes bursts of p / (1 - p) at least, and
    has them where ``burst`` is more than 1 and less than that. ``spread_ms``: up to so much later,
    each by its own luck, still in order. ``faint``: the part lost for want of signal, whatever the
    rest.
    """

    loss: float = 0.0
    damage: float = 0.0
    repeat: float = 0.0
    reorder: float = 0.0
    delay_ms: float = 0.0
    burst: float = 1.0
    spread_ms: float = 0.0
    faint: float = 0.0

    @property
    def perfect(self) -> bool:
        """Whether every frame comes through at once, whole and once."""
        return not any((self.loss, self.damage, self.repeat, self.reorder, self.delay_ms,
                        self.spread_ms, self.faint))  # fmt: skip


def faintness(distance_m: float, range_m: float | None) -> float:
    """Part of the frames lost at a distance, for want of signal.

    The margin falls by 30 dB a decade of distance and is nought at the range, where half is lost;
    each 4 dB make it a tenth. Half way out that is 0.6 %. From twice the range on nothing is heard.
    None: the range has no end.
    """
    if range_m is None or distance_m <= 0.0:
        return 0.0
    if distance_m >= _DEAF_PARTS * range_m:
        return 1.0
    margin_dB = _SLOPE_dB * math.log10(range_m / distance_m)
    return 1.0 / (1.0 + math.pow(10.0, margin_dB / _EDGE_dB))


class Channel:
    """One direction of one path. ``link`` tells paths of one world apart, as a key of draws."""

    __slots__ = ("_bad", "_burst", "_count", "_draws", "_in_order_ns", "_quality", "perfect")

    def __init__(self, quality: Quality, seed: int, link: int, way: Way) -> None:
        self._quality = quality
        self._draws = Draws(seed, 2 * link + way)
        self._count = 0
        self._in_order_ns = 0
        self.perfect = quality.perfect
        """Whether ``offer`` gives back just what it got, at the same time."""
        kept = max(1.0 - quality.loss, 1e-12)
        self._burst = max(quality.burst, quality.loss / kept)
        """Long enough for the loss: the good state lasts one frame at least."""
        self._bad = quality.burst > 1.0 and self._draws.happens(quality.loss, 0, "state")

    def offer(self, frame_bytes: bytes, t_ns: int) -> list[tuple[int, bytes]]:
        """Send one frame at ``t_ns``; return (time of arrival, bytes) of what comes of it.

        No copy, one, or two. Each copy of a repeated frame is lost or damaged by itself.
        """
        if self.perfect:
            return [(t_ns, frame_bytes)]
        self._count += 1
        if self._quality.burst > 1.0:
            self._weather()
        arrivals = self._copy(frame_bytes, self._on_time_ns(t_ns), "")
        if self._draws.happens(self._quality.repeat, self._count, "repeat"):
            later_ns = int(self._draws.between(0.0, _ECHO_NS, self._count, "echo"))
            arrivals += self._copy(frame_bytes, self._delayed_ns(t_ns) + later_ns, " of echo")
        return arrivals

    def _copy(self, frame_bytes: bytes, arrival_ns: int, which: str) -> list[tuple[int, bytes]]:
        if self._lost(which):
            return []
        if self._draws.happens(self._quality.damage, self._count, "damage" + which):
            frame_bytes = self._damaged(frame_bytes, which)
        return [(arrival_ns, frame_bytes)]

    def _lost(self, which: str) -> bool:
        quality, draws = self._quality, self._draws
        if draws.happens(quality.faint, self._count, "faint" + which):
            return True
        if quality.burst > 1.0:
            return self._bad
        return draws.happens(quality.loss, self._count, "loss" + which)

    def _weather(self) -> None:
        """The chain's next state. It leaves the bad one with 1/burst, and enters it so often that
        the mean part of lost frames is ``loss``: loss / (1 - loss) / burst."""
        quality = self._quality
        chance = 1.0 / self._burst if quality.loss < 1.0 else 0.0
        if not self._bad:
            chance *= quality.loss / max(1.0 - quality.loss, 1e-12)
        if self._draws.happens(chance, self._count, "weather"):
            self._bad = not self._bad

    def _delayed_ns(self, t_ns: int) -> int:
        quality, delay_ns = self._quality, 0.0
        if quality.delay_ms:
            delay_ns = quality.delay_ms * 1e6
            delay_ns *= 1.0 + _JITTER * self._draws.uniform(self._count, "jitter")
        if quality.spread_ms:
            delay_ns += quality.spread_ms * 1e6 * self._draws.uniform(self._count, "spread")
        return t_ns + int(delay_ns)

    def _on_time_ns(self, t_ns: int) -> int:
        """Arrival of the first copy: never before its predecessor's, unless reordered."""
        if self._draws.happens(self._quality.reorder, self._count, "reorder"):
            late_ns = self._draws.between(_LATE_AT_LEAST_NS, _LATE_NS, self._count, "late")
            return self._delayed_ns(t_ns) + int(late_ns)
        self._in_order_ns = max(self._in_order_ns, self._delayed_ns(t_ns))
        return self._in_order_ns

    def _damaged(self, frame_bytes: bytes, which: str) -> bytes:
        """Turn over one to MAX_FLIPPED_BITS different bits, the delimiter's among them."""
        bits = 8 * len(frame_bytes)
        wanted = 1 + self._draws.word(self._count, "flips" + which) % min(MAX_FLIPPED_BITS, bits)
        turned: set[int] = set()
        attempt = 0
        while len(turned) < wanted:
            turned.add(self._draws.word(self._count, f"bit {attempt}{which}") % bits)
            attempt += 1
        damaged = bytearray(frame_bytes)
        for bit in turned:
            damaged[bit // 8] ^= 1 << bit % 8
        return bytes(damaged)
