"""What a shared radio channel carries, and which telemetry slot each module gets on it.

Owns that sum alone (WIRE.md, "Telemetry slots"). Pure: rates, lengths and wishes in, a plan out.
Must not know modules, clocks, links or what is sent; who gets the slots, and when, is slots.py's.

One period is common to all, so that slots which do not overlap in it never do; a module that is to
report more seldom gets a whole multiple of it. The period is the shortest that any module asks for,
or a longer one where the channel carries no more: telemetry is slowed, commands never are. What is
left of each period is given to commands, in gaps that are each long enough for one and its answer.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from console.errors import InputError

EVERYDAY_DUTY_PERCENT: Final = 25.0
"""Part of the time that telemetry takes at most where nobody says otherwise: a channel that is full
of telemetry has no room for commands, answers, permits and probes, and local radio rules are
often stricter still."""

FRAME_OVERHEAD_BYTES: Final = 6
"""Check, stuffing and delimiter around a payload."""

RADIO_OVERHEAD_BYTES: Final = 8
"""Preamble, synchronisation word and length that a radio puts before a frame (common practice of
the trade: 4 to 10 bytes)."""

LONGEST_PERIOD_MS: Final = 65_535
"""What a Slot can say."""

_BITS: Final = 8
_NS_A_S: Final = 1_000_000_000
_NS_PER_MS: Final = 1_000_000


@dataclass(frozen=True, slots=True)
class Channel:
    """A radio channel that all modules of a link share, half duplex. ``duty_percent``: the part of
    the time that telemetry may be on the air. Raises InputError for what no channel has."""

    air_rate_bps: int
    duty_percent: float = EVERYDAY_DUTY_PERCENT

    def __post_init__(self) -> None:
        if self.air_rate_bps <= 0:
            raise InputError(f"an air rate of {self.air_rate_bps} bits a second carries nothing")
        if not 0.0 < self.duty_percent <= 100.0:
            raise InputError(f"a duty of {self.duty_percent:g} % is not between 0 and 100")

    def frame_ns(self, payload_bytes: int) -> int:
        """How long the frame of a payload is on the air, with what the radio puts before it,
        rounded up."""
        bits = _BITS * (payload_bytes + FRAME_OVERHEAD_BYTES + RADIO_OVERHEAD_BYTES)
        return -(-bits * _NS_A_S // self.air_rate_bps)


@dataclass(frozen=True, slots=True)
class Place:
    """The slot of one module: fleet times that are ``phase_ms`` modulo ``period_ms``."""

    period_ms: int
    phase_ms: int


@dataclass(frozen=True, slots=True)
class Lengths:
    """How long things take on the channel: a telemetry frame, the guard after it, and a command
    with its answer."""

    frame_ns: int
    guard_ns: int
    command_ns: int


@dataclass(frozen=True, slots=True)
class AirPlan:
    """Slots for all who asked, in the order of asking.

    ``period_ms``: the common period; ``asked_ms``: the shortest that was asked for; ``slot_ms``:
    how long each slot is, its guard with it; ``gaps_ms``: the gaps between bundles of slots, one
    after each; ``load``: the part of the time that telemetry is on the air; ``seldom``: how many
    modules the channel cannot carry even at the longest period, who get no place.
    """

    period_ms: int
    asked_ms: int
    slot_ms: int
    places: tuple[Place, ...]
    gaps_ms: tuple[int, ...]
    load: float
    seldom: int = 0

    @property
    def slowed(self) -> bool:
        """Whether the channel does not carry what was asked for."""
        return self.period_ms > self.asked_ms or self.seldom > 0

    @property
    def gap_share(self) -> float:
        """Part of each period that is in no slot, and so left to commands."""
        return sum(self.gaps_ms) / self.period_ms


def plan(asked_ms: Sequence[int], lengths: Lengths, duty_percent: float) -> AirPlan:
    """Give each of ``asked_ms``, the periods asked for, a place. At least one is asked for."""
    slot_ms = -(-(lengths.frame_ns + lengths.guard_ns) // _NS_PER_MS)
    shortest_ms = min(max(1, min(asked_ms)), LONGEST_PERIOD_MS)
    carried = min(len(asked_ms), _most(slot_ms, lengths.frame_ns, duty_percent))
    fits_ms = _shortest_period_ms(carried, slot_ms, lengths.frame_ns, duty_percent)
    period_ms = max(shortest_ms, fits_ms)
    gaps_ms = _gaps(period_ms - carried * slot_ms, carried, lengths.command_ns)
    phases_ms = _phases(carried, slot_ms, gaps_ms)
    places = tuple(
        Place(_multiple(wish_ms, period_ms), phase_ms)
        for wish_ms, phase_ms in zip(asked_ms, phases_ms, strict=False)
    )
    load = sum(lengths.frame_ns / (place.period_ms * _NS_PER_MS) for place in places)
    seldom = len(asked_ms) - carried
    return AirPlan(period_ms, shortest_ms, slot_ms, places, gaps_ms, load, seldom)


def _shortest_period_ms(count: int, slot_ms: int, frame_ns: int, duty_percent: float) -> int:
    """The shortest period in which so many slots have room, and frames are within the duty."""
    duty = Fraction(duty_percent) / 100
    on_air_ms = Fraction(count * frame_ns, _NS_PER_MS) / duty
    return max(count * slot_ms, -(-on_air_ms.numerator // on_air_ms.denominator))


def _most(slot_ms: int, frame_ns: int, duty_percent: float) -> int:
    """How many modules the channel carries at the longest period; none where one is too many."""
    duty = Fraction(duty_percent) / 100
    within_duty = duty * LONGEST_PERIOD_MS * _NS_PER_MS / frame_ns
    return min(LONGEST_PERIOD_MS // slot_ms, int(within_duty))


def _multiple(wish_ms: int, period_ms: int) -> int:
    """The longest whole multiple of the period that is not longer than what was asked for."""
    times = min(wish_ms, LONGEST_PERIOD_MS) // period_ms
    return period_ms * max(1, times)


def _gaps(free_ms: int, slots: int, command_ns: int) -> tuple[int, ...]:
    """Cut what is free into gaps that are as many as can be, each with room for a command and its
    answer; not more than slots. One that is shorter, where there is not even that much."""
    command_ms = -(-command_ns // _NS_PER_MS)
    count = max(1, min(slots, free_ms // max(1, command_ms)))
    whole_ms, rest = divmod(free_ms, count)
    return tuple(whole_ms + (place < rest) for place in range(count))


def _phases(slots: int, slot_ms: int, gaps_ms: Sequence[int]) -> list[int]:
    """Where each slot begins: bundles of as many slots, as evenly as can be, a gap after each."""
    phases_ms, at_ms = [], 0
    for bundle, gap_ms in enumerate(gaps_ms):
        first, behind = (slots * each // len(gaps_ms) for each in (bundle, bundle + 1))
        phases_ms += [at_ms + slot_ms * place for place in range(behind - first)]
        at_ms += slot_ms * (behind - first) + gap_ms
    return phases_ms
