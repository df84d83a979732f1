"""The radio path to or from one module, one direction: it loses, damages, repeats, delays.

Owns what a bad link does to frames. Knows nothing of what is in them and nothing of line
rates (line.py). A broadcast takes one path a module, so each hears it or not by its own luck.
"""

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


class Way(IntEnum):
    """The direction of a channel, as a key of its draws."""

    TO_MODULE = 0
    TO_CONSOLE = 1


@dataclass(frozen=True, slots=True)
class Quality:
    """How bad a path is: probabilities of 0 to 1 a frame, and the delay of each in ms."""

    loss: float = 0.0
    damage: float = 0.0
    repeat: float = 0.0
    reorder: float = 0.0
    delay_ms: float = 0.0


class Channel:
    """One direction of one path. ``link`` tells paths of one world apart, as a key of draws."""

    __slots__ = ("_count", "_draws", "_in_order_ns", "_quality")

    def __init__(self, quality: Quality, seed: int, link: int, way: Way) -> None:
        self._quality = quality
        self._draws = Draws(seed, 2 * link + way)
        self._count = 0
        self._in_order_ns = 0

    def offer(self, frame_bytes: bytes, t_ns: int) -> list[tuple[int, bytes]]:
        """Send one frame at ``t_ns``; return (time of arrival, bytes) of what comes of it.

        No copy, one, or two. Each copy of a repeated frame is lost or damaged by itself.
        """
        self._count += 1
        arrivals = self._copy(frame_bytes, self._on_time_ns(t_ns), "")
        if self._draws.happens(self._quality.repeat, self._count, "repeat"):
            later_ns = int(self._draws.between(0.0, _ECHO_NS, self._count, "echo"))
            arrivals += self._copy(frame_bytes, self._delayed_ns(t_ns) + later_ns, " of echo")
        return arrivals

    def _copy(self, frame_bytes: bytes, arrival_ns: int, which: str) -> list[tuple[int, bytes]]:
        if self._draws.happens(self._quality.loss, self._count, "loss" + which):
            return []
        if self._draws.happens(self._quality.damage, self._count, "damage" + which):
            frame_bytes = self._damaged(frame_bytes, which)
        return [(arrival_ns, frame_bytes)]

    def _delayed_ns(self, t_ns: int) -> int:
        delay_ns = self._quality.delay_ms * 1e6
        if delay_ns:
            delay_ns *= 1.0 + _JITTER * self._draws.uniform(self._count, "jitter")
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
