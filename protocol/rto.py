"""Round-trip estimate: how long to wait for an answer before sending again.

Owns the estimator of RFC 6298 section 2. Two things of the RFC are left to, or left out for,
the caller: Karn's rule (no sample from a command that was sent more than once) is the caller's
to keep, and there is neither a floor of one second nor doubling; WIRE.md says why. Knows
nothing of commands, links or clocks.

Integers throughout, in nanoseconds, so that a session replays to the same timers anywhere.
"""

from typing import Final

from protocol.errors import LocalProtocolError

_K: Final = 4
"""Multiple of the variation that is added to the mean (RFC 6298 section 2.2)."""
_ALPHA_INVERSE: Final = 8
"""Gain of the mean, alpha = 1/8 (RFC 6298 section 2.3)."""
_BETA_INVERSE: Final = 4
"""Gain of the variation, beta = 1/4 (RFC 6298 section 2.3)."""


class RoundTripEstimator:
    """Smoothed round-trip time and its variation, and the timeout that follows from them.

    All four arguments are nanoseconds. ``initial_ns`` is the timeout before the first sample;
    ``granularity_ns`` is the clock's, G in the RFC. Raises LocalProtocolError where a bound is
    not positive or the bounds are the wrong way round.
    """

    __slots__ = (
        "_doubted",
        "_granularity_ns",
        "_initial_ns",
        "_maximum_ns",
        "_mean_ns",
        "_minimum_ns",
        "_variation_ns",
    )

    def __init__(
        self, initial_ns: int, minimum_ns: int, maximum_ns: int, granularity_ns: int
    ) -> None:
        if not 0 < minimum_ns <= maximum_ns or initial_ns <= 0 or granularity_ns <= 0:
            raise LocalProtocolError(
                f"timeouts must be positive, minimum {minimum_ns} ns not above "
                f"maximum {maximum_ns} ns"
            )
        self._initial_ns = initial_ns
        self._minimum_ns = minimum_ns
        self._maximum_ns = maximum_ns
        self._granularity_ns = granularity_ns
        self._mean_ns: int | None = None
        self._variation_ns = 0
        self._doubted = False

    @property
    def mean_ns(self) -> int | None:
        """SRTT of the RFC, nanoseconds; None before the first sample."""
        return self._mean_ns

    @property
    def variation_ns(self) -> int:
        """RTTVAR of the RFC, nanoseconds; 0 before the first sample."""
        return self._variation_ns

    @property
    def timeout_ns(self) -> int:
        """RTO of the RFC, nanoseconds, held between the minimum and the maximum."""
        if self._mean_ns is None:
            wait_ns = self._initial_ns
        else:
            wait_ns = self._mean_ns + max(self._granularity_ns, _K * self._variation_ns)
        if self._doubted:
            wait_ns = max(wait_ns, self._initial_ns)
        return min(max(wait_ns, self._minimum_ns), self._maximum_ns)

    def sample(self, rtt_ns: int) -> None:
        """Take one measured round trip, nanoseconds. Raises LocalProtocolError below zero.

        The variation is updated with the mean as it was before this sample: section 2.3
        prescribes the order, and the other one gives a smaller timeout.
        """
        if rtt_ns < 0:
            raise LocalProtocolError(f"a round trip of {rtt_ns} ns ends before it began")
        self._doubted = False
        if self._mean_ns is None:
            self._mean_ns = rtt_ns
            self._variation_ns = rtt_ns // 2
            return
        error_ns = abs(self._mean_ns - rtt_ns)
        self._variation_ns += (error_ns - self._variation_ns) // _BETA_INVERSE
        self._mean_ns += (rtt_ns - self._mean_ns) // _ALPHA_INVERSE

    def doubt(self) -> None:
        """Wait at least the initial timeout until the next sample.

        For the caller that got no answer to several sends in a row: the link may have become
        slower than the timeout, and Karn's rule then lets no sample through that would tell.
        The estimate itself is kept, and not cleared as RFC 6298 section 5 would allow: after a
        clear the first sample makes the timeout three times itself, and on a link that only
        loses that wait costs more than all else.
        """
        self._doubted = True
