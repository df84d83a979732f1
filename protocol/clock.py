"""What the console knows of one module's clock, over one link: offset, drift, and how sure.

Owns the arithmetic of the four timestamps and the choice among the last samples. Time is an
argument, nanoseconds throughout; "module time" counts from the module's boot, "console time"
from the session's opening. Knows no messages: those that carry the timestamps are the wire's.

A sample is the exchange of RFC 5905 section 8: the console sends at T1, the module hears it at
T2 and answers at T3, the console hears that at T4. The module's time is ahead of the console's
by theta = ((T2 - T1) + (T3 - T4)) / 2, give or take half of the round trip delta = (T4 - T1) -
(T3 - T2): if one way took no time at all, all of delta was spent on the other. That is a bound
and no estimate, whatever the delays were, as long as both clocks ran true meanwhile.

Of the last eight samples that one is used whose bound is the smallest now (the idea of RFC 5905
section 10: the shortest round trip tells most, and ages). A bound grows with its sample's age by
what the clocks may have drifted apart: at most ``drift_limit_ppm``, or less once a long enough
stretch has shown how they drift.
"""

from collections import deque
from dataclasses import dataclass
from typing import Final

from protocol.errors import LocalProtocolError, RemoteProtocolError

SAMPLES_KEPT: Final = 8
"""Stages of the clock filter (RFC 5905 section 10)."""

DRIFT_LIMIT_PPM: Final = 120
"""Two crystals of 50 ppm each, and some for temperature: common practice of the trade."""

WANDER_PPM: Final = 2
"""How far a drift may wander from what was measured, with the temperature; so a bound never
grows more slowly than this."""

ANCHOR_SETTLES_NS: Final = 60_000_000_000
"""For a minute the drift's beginning may still move to a sample with a shorter round trip."""

_PPM: Final = 1_000_000


@dataclass(frozen=True, slots=True)
class ClockSample:
    """One exchange of four timestamps, reduced. ``at_ns``: console time in its middle;
    ``offset_ns``: module time less console time; ``delay_ns``: round trip, less the time the
    module took."""

    at_ns: int
    offset_ns: int
    delay_ns: int


def reduce_timestamps(t1_ns: int, t2_ns: int, t3_ns: int, t4_ns: int) -> ClockSample:
    """Reduce four timestamps: T1, T4 console time; T2, T3 module time.

    Raises RemoteProtocolError where the module answers before it heard, or took longer than the
    whole exchange: then a timestamp is wrong, or one of the clocks was set.
    """
    delay_ns = (t4_ns - t1_ns) - (t3_ns - t2_ns)
    if t3_ns < t2_ns or delay_ns < 0:
        raise RemoteProtocolError(f"timestamps out of order: round trip of {delay_ns} ns")
    offset_ns = ((t2_ns - t1_ns) + (t3_ns - t4_ns)) // 2
    return ClockSample((t1_ns + t4_ns) // 2, offset_ns, delay_ns)


class ModuleClock:
    """The console's estimate of one module's clock. One a module and link.

    ``resolution_ns``: of both clocks together, as far as timestamps are rounded. Raises
    LocalProtocolError where an argument is negative.
    """

    def __init__(self, resolution_ns: int, drift_limit_ppm: int = DRIFT_LIMIT_PPM) -> None:
        if resolution_ns < 0 or drift_limit_ppm < 0:
            raise LocalProtocolError("resolution and drift limit are not negative")
        self._resolution_ns = resolution_ns
        self._drift_limit_ppm = drift_limit_ppm
        self._samples: deque[ClockSample] = deque(maxlen=SAMPLES_KEPT)
        self._anchor: ClockSample | None = None
        """The sample that the drift is measured from."""
        self.exchanges = 0
        """How many were had since the clock was last void."""

    def sample(self, t1_ns: int, t2_ns: int, t3_ns: int, t4_ns: int) -> ClockSample:
        """Take one exchange. Raises RemoteProtocolError as reduce_timestamps does; nothing is
        taken then."""
        taken = reduce_timestamps(t1_ns, t2_ns, t3_ns, t4_ns)
        self._samples.append(taken)
        self.exchanges += 1
        if self._beats_anchor(taken):
            self._anchor = taken
        return taken

    def void(self) -> None:
        """Forget everything: the module restarted, or the computer was suspended."""
        self._samples.clear()
        self._anchor = None
        self.exchanges = 0

    @property
    def drift_ppm(self) -> float:
        """How much faster the module's clock runs, parts in a million; 0 while not known."""
        return self._drift()[0]

    def offset_ns(self, console_ns: int) -> int:
        """Module time less console time, at a console time. Raises LocalProtocolError before
        the first sample."""
        best, drift_ppm, _ = self._best(console_ns)
        return best.offset_ns + round(drift_ppm * (console_ns - best.at_ns) / _PPM)

    def bound_ns(self, console_ns: int) -> int:
        """How far ``offset_ns`` may be from the truth at that time: at most half the shortest
        round trip of the samples, the drift allowed for its age, and the resolution."""
        best, _, wander_ppm = self._best(console_ns)
        return self._bound_of(best, console_ns, wander_ppm)

    def known(self, console_ns: int, limit_ns: int) -> bool:
        """Whether there is an estimate, and its bound is at most ``limit_ns``."""
        return bool(self._samples) and self.bound_ns(console_ns) <= limit_ns

    def module_time_ns(self, console_ns: int) -> int:
        """Module time at a console time, give or take ``bound_ns``."""
        return console_ns + self.offset_ns(console_ns)

    def console_time_ns(self, module_ns: int) -> int:
        """Console time at a module time, give or take the bound at that time.

        The offset is looked up twice: the second time at a console time that is wrong by no
        more than the drift of the first look's error.
        """
        latest = self._latest()
        about_ns = module_ns - latest.offset_ns
        return module_ns - self.offset_ns(about_ns)

    # -- within --------------------------------------------------------------------------

    def _latest(self) -> ClockSample:
        if not self._samples:
            raise LocalProtocolError("the module's clock is not known")
        return self._samples[-1]

    def _best(self, console_ns: int) -> tuple[ClockSample, float, float]:
        """The sample with the smallest bound at that time, the drift, and how far it may be
        wrong, both in ppm."""
        self._latest()
        drift_ppm, wander_ppm = self._drift()
        best = min(self._samples, key=lambda s: self._bound_of(s, console_ns, wander_ppm))
        return best, drift_ppm, wander_ppm

    def _bound_of(self, sample: ClockSample, console_ns: int, wander_ppm: float) -> int:
        # The clocks ran apart during the exchange, too: its age counts from its beginning.
        age_ns = abs(console_ns - sample.at_ns) + sample.delay_ns
        half_ns = (sample.delay_ns + 1) // 2
        return half_ns + round(wander_ppm * age_ns / _PPM) + self._resolution_ns

    def _drift(self) -> tuple[float, float]:
        """Drift between the anchor and the best of the last samples, and how far it may be
        wrong; nothing is claimed that is not surer than the limit itself."""
        unknown = 0.0, float(self._drift_limit_ppm)
        if self._anchor is None or not self._samples:
            return unknown
        anchor = self._anchor
        newest = min(self._samples, key=lambda each: each.delay_ns)
        span_ns = newest.at_ns - anchor.at_ns
        if span_ns <= 0:
            return unknown
        doubt_ns = (anchor.delay_ns + newest.delay_ns + 1) / 2 + 2 * self._resolution_ns
        wander_ppm = doubt_ns * _PPM / span_ns + WANDER_PPM
        if wander_ppm >= self._drift_limit_ppm:
            return unknown
        return (newest.offset_ns - anchor.offset_ns) * _PPM / span_ns, wander_ppm

    def _beats_anchor(self, sample: ClockSample) -> bool:
        """Whether to measure the drift from this sample on: its round trip is shorter, and the
        stretch behind it was not long yet."""
        if self._anchor is None:
            return True
        near = sample.at_ns - self._anchor.at_ns < ANCHOR_SETTLES_NS
        return near and sample.delay_ns < self._anchor.delay_ns
