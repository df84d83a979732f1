"""One direction of the serial line between console and bridge: bytes at a fixed rate.

Owns when each byte is across. Knows nothing of frames, except that a zero byte is where a
waiting reader may want to be woken. Start bit, eight data bits, stop bit: ten bits a byte.
"""

import re
from collections import deque
from typing import Final

BITS_A_BYTE: Final = 10
_NS_A_S: Final = 1_000_000_000
_PIECES: Final = re.compile(rb"[^\0]*\0|[^\0]+")
"""Bytes up to and with the next zero byte, or the rest where there is none."""


class Line:
    """A wire with a sender's queue in front of it; bytes leave one after another."""

    __slots__ = ("_free_ns", "_queue", "_rate_baud", "_taken")

    def __init__(self, rate_baud: int) -> None:
        self._rate_baud = rate_baud
        self._queue: deque[tuple[int, bytes]] = deque()
        self._taken = 0
        self._free_ns = 0

    def put(self, data: bytes, t_ns: int) -> None:
        """Queue bytes at ``t_ns``; they start when what is queued before them is across."""
        self._free_ns = max(t_ns, self._free_ns)
        whole = data.find(0) == len(data) - 1  # one frame, as nearly always
        for piece in (data,) if whole and data else _PIECES.findall(data):
            self._queue.append((self._free_ns, piece))
            self._free_ns += self._duration_ns(len(piece))

    def take(self, t_ns: int) -> bytes:
        """Return the bytes that came across by ``t_ns`` and were not taken yet."""
        arrived = []
        while self._queue:
            start_ns, piece = self._queue[0]
            across = min(self._bytes_in(t_ns - start_ns), len(piece))
            if across > self._taken:
                arrived.append(piece[self._taken : across])
                self._taken = across
            if across < len(piece):
                break
            self._queue.popleft()
            self._taken = 0
        return b"".join(arrived)

    def waiting(self, t_ns: int) -> int:
        """Return how many queued bytes are not across at ``t_ns``."""
        return sum(
            len(piece) - min(max(self._bytes_in(t_ns - start_ns), 0), len(piece))
            for start_ns, piece in self._queue
        )

    def behind(self, t_ns: int) -> int:
        """Return about how many bytes are not across at ``t_ns``, from when the line is free
        again: ``waiting`` to within one, at once however many there are."""
        return max(0, self._bytes_in(self._free_ns - t_ns))

    def discard(self, t_ns: int) -> None:
        """Drop what has not started by ``t_ns``; the byte that is on the wire completes."""
        kept: deque[tuple[int, bytes]] = deque()
        for start_ns, piece in self._queue:
            begun = min(max(self._bytes_in(t_ns - start_ns) + 1, 0), len(piece))
            if start_ns <= t_ns and begun:
                kept.append((start_ns, piece[:begun]))
        self._queue = kept
        self._free_ns = kept[-1][0] + self._duration_ns(len(kept[-1][1])) if kept else t_ns

    @property
    def next_ns(self) -> int | None:
        """When the piece on the wire, up to its zero byte or its end, is across."""
        if not self._queue:
            return None
        start_ns, piece = self._queue[0]
        return start_ns + self._duration_ns(len(piece))

    def _duration_ns(self, count: int) -> int:
        """Return how long ``count`` bytes take, rounded up, so that none is early."""
        return -(-count * BITS_A_BYTE * _NS_A_S // self._rate_baud)

    def _bytes_in(self, duration_ns: int) -> int:
        return duration_ns * self._rate_baud // (BITS_A_BYTE * _NS_A_S)
