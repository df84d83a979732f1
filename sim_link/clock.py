"""Fleet time from the computer's clock: monotonic, from 0, faster or slower by the pace.

Owns the only place in the simulator that looks at a clock; protocol_sim.py and serve.py drive
their worlds with it.
"""

import time


class PacedClock:
    """Counts fleet nanoseconds since it was made, ``pace`` for one of the computer's."""

    __slots__ = ("_start_ns", "pace")

    def __init__(self, pace: float) -> None:
        self.pace = pace
        self._start_ns = time.monotonic_ns()

    def now_ns(self) -> int:
        """Return fleet time in nanoseconds."""
        elapsed_ns = time.monotonic_ns() - self._start_ns
        return elapsed_ns if self.pace == 1.0 else int(elapsed_ns * self.pace)

    def wait_s(self, until_ns: int | None, at_most_s: float) -> float:
        """Return the seconds of the computer's clock until a fleet time; 0 where it passed.

        ``until_ns`` None, never: ``at_most_s``. A tenth of a millisecond is added, so that a
        timer that is a little early does not make its caller turn in circles.
        """
        if until_ns is None:
            return at_most_s
        left_ns = until_ns - self.now_ns()
        if left_ns <= 0:
            return 0.0
        return min(left_ns / self.pace * 1e-9 + 1e-4, at_most_s)
