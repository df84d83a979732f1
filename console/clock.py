"""The session's clock: monotonic nanoseconds from the opening on, scaled by the pace.

Owns the only reading of real time in the console. Everything else takes times as arguments.
At pace 4 a rehearsal's second lasts a quarter of a real one, on both sides of the link.
"""

import time
from collections.abc import Callable
from datetime import UTC, datetime


class SessionClock:
    """Counts fleet time from zero. ``source_ns`` is a monotonic clock of real time."""

    def __init__(self, pace: float = 1.0, source_ns: Callable[[], int] = time.monotonic_ns) -> None:
        self.pace = pace
        self._source_ns = source_ns
        self._opened_ns = source_ns()

    def now_ns(self) -> int:
        """Fleet nanoseconds since this clock was made."""
        return int((self._source_ns() - self._opened_ns) * self.pace)

    def real_s(self, fleet_ns: int) -> float:
        """Real seconds that so many fleet nanoseconds last; never negative."""
        return max(0.0, fleet_ns / self.pace / 1e9)


def utc_now() -> str:
    """Now in UTC, ISO 8601 with milliseconds."""
    return datetime.now(UTC).isoformat(timespec="milliseconds")


def utc_seconds() -> int:
    """Whole seconds since 1970: the first choice for a console epoch."""
    return int(time.time())


def next_utc_second() -> int:
    """Wait until the next whole second since 1970 begins, and return it.

    Of two calls one after the other on one computer, the second never gets the same.
    """
    second = utc_seconds() + 1
    time.sleep(max(0.0, second - time.time()))
    return second
