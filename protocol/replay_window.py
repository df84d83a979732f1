"""The replay window: which counters of one sender were seen, and which are too old to say.

Owns the sliding bitmap of RFC 4303 section 3.4.3. Knows no keys and no frames: a counter is
offered only once its frame is known to be authentic.
"""

from typing import Final

WINDOW: Final = 64
"""Counters that may come out of order; RFC 4303 section 3.4.3 prefers 64."""


class ReplayWindow:
    """Counters of one sender. Nothing at or below ``edge`` is taken that was not missing."""

    __slots__ = ("_seen", "edge")

    def __init__(self, edge: int = 0) -> None:
        self.edge = edge
        """The greatest counter taken, the window's right edge."""
        self._seen = (1 << WINDOW) - 1
        """Bit n: ``edge`` - n was seen. All are, at first: what came before counts as old."""

    def accept(self, counter: int) -> bool:
        """Take a counter if it is new; say whether it was."""
        ahead = counter - self.edge
        if ahead > 0:
            self._seen = (self._seen << ahead | 1) & ((1 << WINDOW) - 1) if ahead < WINDOW else 1
            self.edge = counter
            return True
        if self.too_old(counter) or self._seen & 1 << -ahead:
            return False
        self._seen |= 1 << -ahead
        return True

    def too_old(self, counter: int) -> bool:
        """Say whether a counter lies left of the window, so that nothing is known of it."""
        return counter <= self.edge - WINDOW
