"""Limits of time that guard against frozen screens, dead links and late frames.

Owns their defaults and what becomes of them in a rehearsal. They are real seconds: a person's
screen beats its heart and a computer answers in real time, however fast a simulated fleet lives.
So a pace multiplies them in fleet time, and at pace 1 they are what they say.
"""

from dataclasses import dataclass, field
from typing import Final

from protocol.allegiance import LONGEST_PERMIT_MS
from protocol.resend import ResendPolicy

NS_PER_MS: Final = 1_000_000
RENEWALS: Final = 8
"""Permits sent in each permit's length: WIRE.md has the sum that shows why not fewer."""

_LONGEST_NS: Final = LONGEST_PERMIT_MS * NS_PER_MS * 4 // 5
"""Below what a module takes for a permit, by more than any bound of its clock."""


@dataclass(frozen=True, slots=True)
class Limits:
    """``permit_ns``: from the last sign of life to the permit's end; ``start_within_ns``: from an
    order to the latest start of its motion; ``clock_bound_ns``: how well a module's clock must be
    known before it is ordered to move; ``stage_lead_ns``: from the first Go to the start;
    ``resend``: how long and how often a command is tried."""

    permit_ns: int = 1_000 * NS_PER_MS
    start_within_ns: int = 5_000 * NS_PER_MS
    clock_bound_ns: int = 200 * NS_PER_MS
    stage_lead_ns: int = 400 * NS_PER_MS
    resend: ResendPolicy = field(default_factory=ResendPolicy)

    def at_pace(self, pace: float) -> "Limits":
        """The same real times in the fleet time of a rehearsal at this pace."""
        factor = max(1.0, pace)
        return Limits(
            min(round(self.permit_ns * factor), _LONGEST_NS),
            round(self.start_within_ns * factor),
            round(self.clock_bound_ns * factor),
            round(self.stage_lead_ns * factor),
            self.resend.stretched(factor),
        )

    @property
    def renewal_ns(self) -> int:
        """From one permit to the next."""
        return self.permit_ns // RENEWALS
