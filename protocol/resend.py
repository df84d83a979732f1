"""How often and how long a command is tried: the figures behind the console's timers.

Owns the policy and its bounds, which are WIRE.md's, "When to send again", with the reasons there
for leaving out RFC 6298's floor and doubling. What is done when a timer goes off is exchange.py's.
"""

from dataclasses import dataclass
from typing import Final

from protocol.errors import LocalProtocolError
from protocol.rto import RoundTripEstimator

NS_PER_MS: Final = 1_000_000


@dataclass(frozen=True, slots=True)
class ResendPolicy:
    """How often and how long to try. ``tries``: sends in CALLING, and again in ASKING; the
    ``_ns`` bounds are RoundTripEstimator's; ``finish_margin_ns``: how much longer than expected
    a command may take before the module is asked. Raises LocalProtocolError below 1 try."""

    tries: int = 10
    initial_ns: int = 250 * NS_PER_MS
    minimum_ns: int = 30 * NS_PER_MS
    maximum_ns: int = 2_000 * NS_PER_MS
    granularity_ns: int = 1 * NS_PER_MS
    finish_margin_ns: int = 300 * NS_PER_MS

    def __post_init__(self) -> None:
        if self.tries < 1 or self.finish_margin_ns < 0:
            raise LocalProtocolError("a resend policy needs at least one try and a margin >= 0")
        self.estimator()  # raises where the bounds are wrong

    def stretched(self, factor: float) -> "ResendPolicy":
        """The same tries with all times so much longer: for time that runs faster than the
        computers that answer."""

        def longer(time_ns: int) -> int:
            return round(time_ns * factor)

        return ResendPolicy(
            self.tries,
            longer(self.initial_ns),
            longer(self.minimum_ns),
            longer(self.maximum_ns),
            longer(self.granularity_ns),
            longer(self.finish_margin_ns),
        )

    def estimator(self) -> RoundTripEstimator:
        """Make a fresh round-trip estimator with this policy's bounds."""
        return RoundTripEstimator(
            self.initial_ns, self.minimum_ns, self.maximum_ns, self.granularity_ns
        )
