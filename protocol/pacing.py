"""Pacing: when bytes may be handed to a serial line, so that little waits in front of the wire.

Owns the reckoning of one line's transmit queue. Whatever has been handed over cannot be
overtaken, not even by an all-stop; so what waits is held to a short time, or to one frame where
a frame alone takes longer than that. Knows nothing of ports, threads or clocks: it is told
what was handed over and when, and answers with a time.

It reckons from the line's rate, without asking the driver: what a driver reports of its queue
leaves out the buffers behind it, in a USB converter for one (common practice of the trade).
"""

from typing import Final

from protocol.errors import LocalProtocolError

BITS_PER_BYTE: Final = 10
"""8N1: a start bit, eight data bits, a stop bit."""

_NS_PER_S: Final = 1_000_000_000


class LinePacer:
    """Transmit queue of one line, in time: until when the bytes handed over keep it busy.

    ``rate_baud``: bits a second. ``ahead_ns``: how much may wait before the wire. Raises
    LocalProtocolError where the rate is not positive or ``ahead_ns`` is negative.
    """

    __slots__ = ("_ahead_ns", "_idle_ns", "_rate_baud")

    def __init__(self, rate_baud: int, ahead_ns: int = 10_000_000) -> None:
        if rate_baud <= 0 or ahead_ns < 0:
            raise LocalProtocolError(f"cannot pace {rate_baud} baud with {ahead_ns} ns ahead")
        self._rate_baud = rate_baud
        self._ahead_ns = ahead_ns
        self._idle_ns: int | None = None

    def duration_ns(self, n_bytes: int) -> int:
        """Time that so many bytes take on the wire, nanoseconds, rounded up.

        Up, so that a long run of small frames never gets ahead of the wire by rounding.
        """
        return -(-n_bytes * BITS_PER_BYTE * _NS_PER_S // self._rate_baud)

    def waiting_ns(self, t_ns: int) -> int:
        """How long the line is still busy with what was handed over, seen from ``t_ns``."""
        return 0 if self._idle_ns is None else max(0, self._idle_ns - t_ns)

    def ready_ns(self, n_bytes: int, t_ns: int) -> int:
        """Earliest time, not before ``t_ns``, at which ``n_bytes`` may be handed over.

        After that, at most ``ahead_ns`` waits before the wire; or these bytes alone, where they
        take longer than that.
        """
        spare_ns = max(0, self._ahead_ns - self.duration_ns(n_bytes))
        return t_ns + max(0, self.waiting_ns(t_ns) - spare_ns)

    def sent(self, n_bytes: int, t_ns: int) -> None:
        """Take note that ``n_bytes`` were handed over at ``t_ns``, whether asked for or not.

        An all-stop does not ask; what comes after it then waits the longer.
        """
        self._idle_ns = t_ns + self.waiting_ns(t_ns) + self.duration_ns(n_bytes)
