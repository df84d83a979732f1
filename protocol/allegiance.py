"""Whom a module follows, and until when its wheel may turn: the module's side of the permit.

Owns three things that belong together: which console the module follows and whether another may
take it over; what that console told it of its clock; and the drive permit, which is given in the
console's time and ends in the module's. Time is an argument: milliseconds of module time since
boot, 32 bits, compared modulo 2**32 (RFC 1982 section 3.2), so that a module may stay on for
longer than 49 days. Knows no wheels and no commands.

Rules, as in WIRE.md, "Owner" and "Drive permit":

    a roll call of the followed console, or of any while nobody owns the module, is adopted if its
    epoch is greater than the one followed
    a console owns the module until its permit ends, and for OWNER_GRACE_MS after it was adopted
    a permit's end in module time is its expiry plus the offset that was told, less the bound that
    was told, less what the clocks may have drifted apart since, less a millisecond of rounding
    a permit that would last longer than LONGEST_PERMIT_MS is none: a clock was told wrong
    a telemetry slot is the followed console's: it ends with its Release, and with another console
"""

from dataclasses import dataclass
from typing import Final

from protocol.message import BOUND_UNKNOWN, Permit, Probe, Slot

OWNER_GRACE_MS: Final = 3_000
"""Time for a console to learn the clock and give its first permit before another may call."""

LONGEST_PERMIT_MS: Final = 60_000

DRIFT_SHIFT: Final = 13
"""The bound grows by its age divided by 2**13, 122 parts in a million: DRIFT_LIMIT_PPM of
clock.py, as a shift that the smallest module has."""

_TOO_OLD_MS: Final = 1 << 30
"""Twelve days: a quarter of the way round the clock."""

_WRAP: Final = 1 << 32
_HALF: Final = 1 << 31


def ms_until(then_ms: int, now_ms: int) -> int:
    """Milliseconds from ``now_ms`` until ``then_ms``, both modulo 2**32; negative once past."""
    ahead = (then_ms - now_ms) % _WRAP
    return ahead - _WRAP if ahead >= _HALF else ahead


@dataclass(frozen=True, slots=True)
class _Told:
    """What a console said of the module's clock, and when."""

    offset_ms: int
    bound_ms: int
    at_ms: int


class Allegiance:
    """One module, from one boot to the next. All times of one module are in its own time."""

    def __init__(self) -> None:
        self.epoch = 0
        self.console = 0
        """The console followed, 0 for none since boot."""
        self._adopted_ms: int | None = None
        self._told: _Told | None = None
        self._expiry_ms: int | None = None
        """Newest expiry heard, in fleet time."""
        self._slot: Slot | None = None

    def roll_call(self, epoch: int, console: int, now_ms: int) -> bool:
        """Hear a roll call; follow its console where the rules allow. True where the epoch was
        adopted: the command memory is then to be emptied."""
        other = console != self.console
        if not console or epoch <= self.epoch or (other and self.owner_left_ms(now_ms) > 0):
            return False
        self.epoch, self.console, self._adopted_ms = epoch, console, now_ms
        if other:
            self._told = self._expiry_ms = self._slot = None
        return True

    def hear_probe(self, probe: Probe, now_ms: int) -> None:
        """Take what the followed console makes of this module's clock; nobody else's word."""
        if self._follows(probe.console) and probe.bound_ms != BOUND_UNKNOWN:
            self._told = _Told(probe.offset_ms, probe.bound_ms, now_ms)

    def hear_permit(self, permit: Permit, now_ms: int) -> None:
        """Take a permit of the followed console, unless a later one was heard before."""
        if not self._follows(permit.console):
            return
        if self._expiry_ms is None or ms_until(permit.expiry_ms, self._expiry_ms) > 0:
            self._expiry_ms = permit.expiry_ms

    def release(self, console: int) -> None:
        """The followed console lets go: permit, ownership and slot end; its epoch is still
        followed."""
        if self._follows(console):
            self._expiry_ms = self._adopted_ms = self._slot = None

    def hear_slot(self, slot: Slot) -> bool:
        """Take a telemetry slot of the followed console; period 0 takes it away, and a phase that
        is not within its period is no slot. True where the slot is another than before."""
        if not self._follows(slot.console) or 0 < slot.period_ms <= slot.phase_ms:
            return False
        before, self._slot = self._slot, slot if slot.period_ms else None
        return self._slot != before

    @property
    def clock_told(self) -> bool:
        """Whether the followed console has told what it makes of this module's clock."""
        return self._told is not None

    def module_ms(self, fleet_ms: int) -> int | None:
        """A fleet time in module time, give or take the bound; None while no clock was told."""
        return None if self._told is None else (fleet_ms + self._told.offset_ms) % _WRAP

    @property
    def slot_period_ms(self) -> int:
        """Time from one slot to the next; 0 while none is kept: there is no slot, or no clock to
        keep it by."""
        return 0 if self._slot is None or self._told is None else self._slot.period_ms

    def slot_after(self, from_ms: int) -> int | None:
        """The first module time, at ``from_ms`` or later, that is this module's slot; None while
        none is kept."""
        if self._slot is None or self._told is None:
            return None
        period_ms = self._slot.period_ms
        passed_ms = (from_ms - self._told.offset_ms) % _WRAP % period_ms
        return (from_ms + (self._slot.phase_ms - passed_ms) % period_ms) % _WRAP

    def report_due_ms(self, last_ms: int, setting_ms: int) -> int:
        """When telemetry is due next: at the first slot that is not sooner than half its period
        after ``last_ms``, when it was last due; without a slot, the setting after that."""
        slot_ms = self.slot_after(last_ms + self.slot_period_ms // 2)
        return (last_ms + setting_ms) % _WRAP if slot_ms is None else slot_ms

    def permit_left_ms(self, now_ms: int) -> int:
        """How long the wheel may still turn; 0 without a permit."""
        if self._told is None or self._expiry_ms is None:
            return 0
        left_ms = self._permit_ends_in_ms(self._told, self._expiry_ms, now_ms)
        return left_ms if 0 < left_ms <= LONGEST_PERMIT_MS else 0

    @staticmethod
    def _permit_ends_in_ms(told: _Told, expiry_ms: int, now_ms: int) -> int:
        """Milliseconds until a permit's end in module time; negative once past."""
        age_ms = max(0, ms_until(now_ms, told.at_ms))
        doubt_ms = told.bound_ms + (age_ms >> DRIFT_SHIFT) + 1
        return ms_until(expiry_ms + told.offset_ms - doubt_ms, now_ms)

    def owner_left_ms(self, now_ms: int) -> int:
        """How long no other console can take the module over; 0: any can."""
        grace_ms = 0
        if self._adopted_ms is not None:
            left_ms = ms_until(self._adopted_ms + OWNER_GRACE_MS, now_ms)
            grace_ms = left_ms if 0 < left_ms <= OWNER_GRACE_MS else 0
        return max(grace_ms, self.permit_left_ms(now_ms))

    def forget_old(self, now_ms: int) -> None:
        """Forget what ended long ago, lest it seem to lie ahead once the milliseconds have
        wrapped: to be called now and then, at least every twelve days."""
        if self._told is not None and (now_ms - self._told.at_ms) % _WRAP >= _TOO_OLD_MS:
            self._told = None
        if self._told is not None and self._expiry_ms is not None:
            ends_in_ms = self._permit_ends_in_ms(self._told, self._expiry_ms, now_ms)
            if ends_in_ms <= -_TOO_OLD_MS:
                self._expiry_ms = None
        if self._adopted_ms is not None and (now_ms - self._adopted_ms) % _WRAP > OWNER_GRACE_MS:
            self._adopted_ms = None

    def _follows(self, console: int) -> bool:
        """Whether this is the console followed; 0 is nobody's number, also before any was."""
        return console != 0 and console == self.console
