"""When a virtual module's telemetry is due: at a phase of its own, or in the slot it was given.

Owns the timer and nothing else; what a slot is, and whose, is the allegiance's (WIRE.md,
"Telemetry slots"). Knows no messages. Time is an argument: ``due_ns`` is fleet time, and is looked
at with every event of a fleet, so it is a plain field that stands until something changes it.
"""

from typing import Final

from sim_link.box import Boot

_NS_PER_MS: Final = 1_000_000


class ReportTimes:
    """The timer of one module. ``due_ns``: when telemetry is next due."""

    __slots__ = ("_last_ns", "_slotted", "due_ns")

    def __init__(self, first_ns: int, setting_ms: int) -> None:
        self.due_ns = first_ns
        self._last_ns = first_ns - setting_ms * _NS_PER_MS
        """When it was last due, or would have been."""
        self._slotted = False

    def reported(self, boot: Boot, setting_ms: int) -> None:
        """What was due is sent."""
        self._last_ns = self.due_ns
        self._plan(boot, setting_ms)

    def look(self, boot: Boot, setting_ms: int, t_ns: int) -> None:
        """Something was heard at ``t_ns`` that may give a slot, move it or end it. What is
        overdue by it is due now."""
        if self._slotted or boot.allegiance.slot_period_ms:
            self._plan(boot, setting_ms)
            self.due_ns = max(self.due_ns, t_ns)

    def shorten(self, setting_ms: int, t_ns: int) -> None:
        """A setting was written; a shorter period holds from now on, where no slot is kept."""
        if not self._slotted:
            self.due_ns = min(self.due_ns, t_ns + setting_ms * _NS_PER_MS)

    def restart(self) -> None:
        """A new boot, which has no slot: what is due next stays, and goes on by the setting."""
        self._slotted = False

    def _plan(self, boot: Boot, setting_ms: int) -> None:
        allegiance, time = boot.allegiance, boot.time
        period_ms = allegiance.slot_period_ms
        self._slotted = period_ms > 0
        if not period_ms:
            self.due_ns = self._last_ns + setting_ms * _NS_PER_MS
            return
        due_ms = allegiance.report_due_ms(time.ms(self._last_ns), setting_ms)
        self.due_ns = time.at_ns(due_ms, self._last_ns)
