"""Handing out telemetry slots: to whom, when, and when again.

Owns that schedule. The plan of a link's channel is airtime.py's; what a module does with a slot is
WIRE.md's ("Telemetry slots"). Says what is due and sends nothing. Time is an argument; modules are
known as pictures, their clocks as the reducer keeps them.

A link is planned once its modules have been the same for a while, and anew when one more is there
or a setting has changed. Slots go out one at a time, so seldom that they take an eighth of the
channel. Nobody answers a Slot: a module that is found off its slot, look after look, or is not
heard any more, gets it again, ever more seldom.
"""

from collections import deque
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from typing import Any, Final, NamedTuple

from console.airtime import AirPlan, Channel, Lengths, Place, plan
from console.limits import NS_PER_MS
from console.upkeep import ClockOf, Saying, fleet_ms
from console.view import ModuleView
from protocol.clock import ModuleClock
from protocol.codes import Flags, SettingId, identity_bits
from protocol.layout import CODES, HEADER_BYTES, LAYOUTS
from protocol.message import Answer, Echo, Pivot, Probe, Slot, Telemetry
from protocol.seal import SEAL_BYTES

LOOK_NS: Final = 1_000 * NS_PER_MS
"""From one look at who is off its slot to the next."""
SETTLE_NS: Final = 2_000 * NS_PER_MS
"""A link whose modules, or their settings, have not changed for so long is planned."""
MISSES: Final = 3
"""Looks in a row that find a module off its slot: one may be telemetry at a change of activity."""
SHARE_OF_AIR: Final = 8
"""A Slot waits this many times as long as it is on the air."""
LONGEST_WAIT_NS: Final = 60_000 * NS_PER_MS
"""At most so long for one who never keeps its slot: it may not know the message."""
LEAST_GUARD_NS: Final = 1 * NS_PER_MS
MOST_GUARD_NS: Final = 10 * NS_PER_MS
"""One module whose clock is hardly known must not slow all the others."""

_ROUNDING_NS: Final = NS_PER_MS // 2
"""The offset that a module was told is in whole milliseconds."""
_WRAP: Final = 1 << 32
_TOLD: Final = int(Flags.CLOCK_TOLD)

ReportOf = Callable[[int], int | None]
"""Module time in ms of the newest telemetry of the module of this count; None before the first."""


class _Seen(NamedTuple):
    """What is known of the modules' clocks and reports at this moment."""

    clock_of: ClockOf
    report_of: ReportOf
    t_ns: int


class NewPlan(NamedTuple):
    """A link that was planned, of the channel as it is."""

    link: int
    modules: int
    plan: AirPlan


@dataclass(slots=True)
class _Given:
    """A slot that a module was given: when, when a report was last looked at, and how many in a row
    were off it. ``tries`` counts how often it was given without being seen to be kept."""

    boot: int
    place: Place
    at_ns: int
    heard_ns: int
    tries: int = 1
    misses: int = 0
    looked_ms: int | None = None


@dataclass(slots=True)
class _Link:
    """One link's channel: who is on it, what was planned, who waits for a slot."""

    wishes: dict[int, int] = field(default_factory=dict)
    changed_ns: int = 0
    guard_ns: int = 0
    planned: bool = False
    last: AirPlan | None = None
    places: dict[int, Place] = field(default_factory=dict)
    waiting: deque[int] = field(default_factory=deque)
    free_ns: int = 0


class SlotKeeper:
    """Hands out the slots of ``channel``, of which each link has one. ``sealed``: frames are."""

    def __init__(self, channel: Channel, sealed: bool) -> None:
        self._channel = channel
        self._seal_bytes = SEAL_BYTES if sealed else 0
        self._exchange_ns = self._air_ns(Probe) + self._air_ns(Echo)
        self._links: dict[int, _Link] = {}
        self._given: dict[int, _Given] = {}
        self._news: list[NewPlan] = []
        self._look_ns = 0
        self.next_ns = 0

    @property
    def probe_gap_ns(self) -> int:
        """From one Probe to the next at least, so that clocks take an eighth of the channel too."""
        return SHARE_OF_AIR * self._exchange_ns

    def due(
        self,
        console: int,
        modules: Sequence[ModuleView],
        clock_of: ClockOf,
        report_of: ReportOf,
        t_ns: int,
    ) -> list[Saying]:
        """Slots whose time it is to be given, at most one on each link."""
        if t_ns < self.next_ns:
            return []
        # One that has just restarted follows nobody; its place waits for it.
        ours = {each.module: each for each in modules if each.console in (console, 0)}
        if t_ns >= self._look_ns:
            self._look_ns = t_ns + LOOK_NS
            for link in sorted({each.link for each in ours.values()}):
                on = [each for each in ours.values() if each.link == link]
                self._look(link, on, _Seen(clock_of, report_of, t_ns))
        sayings = [
            self._give(console, ours[module], state.places[module], t_ns)
            for state in self._links.values()
            if (module := self._next(state, ours, t_ns)) is not None
        ]
        busy = [state.free_ns for state in self._links.values() if state.waiting]
        self.next_ns = min([self._look_ns, *busy])
        return sayings

    def plans(self) -> list[NewPlan]:
        """What was planned since the last call, where it is another plan than before."""
        news, self._news = self._news, []
        return news

    # -- within --------------------------------------------------------------------------

    def _air_ns(self, message_type: type[Any]) -> int:
        body_bytes = LAYOUTS[CODES[message_type]].body.size
        return self._channel.frame_ns(HEADER_BYTES + body_bytes + self._seal_bytes)

    def _look(self, link: int, on: Sequence[ModuleView], seen: _Seen) -> None:
        """See who is there, plan where that is due, and queue who has no slot or does not keep
        it."""
        state, t_ns = self._links.setdefault(link, _Link()), seen.t_ns
        wishes = _wishes(on)
        if wishes != state.wishes:
            state.wishes, state.changed_ns, state.planned = wishes, t_ns, False
        if wishes and not state.planned and t_ns - state.changed_ns >= SETTLE_NS:
            self._plan(link, state, self._guard_ns(on, seen))
        queued = set(state.waiting)
        for module in on:
            place = state.places.get(module.module)
            ready = module.console and module.flags & _TOLD
            if place is None or module.module in queued or not ready:
                continue
            if self._wants(module, place, state.guard_ns, seen):
                state.waiting.append(module.module)

    def _guard_ns(self, on: Iterable[ModuleView], seen: _Seen) -> int:
        """Twice what a clock may be wrong by. That the two frames of an exchange take their time
        on the air is no doubt of the clock, though its bound counts it."""
        clocks = [seen.clock_of(each.module) for each in on]
        bounds_ns = [each.bound_ns(seen.t_ns) for each in clocks if each is not None]
        doubt_ns = max(bounds_ns, default=0) - self._exchange_ns // 2
        wide_ns = 2 * (max(0, doubt_ns) + _ROUNDING_NS)
        return min(max(wide_ns, LEAST_GUARD_NS), MOST_GUARD_NS)

    def _plan(self, link: int, state: _Link, guard_ns: int) -> None:
        command_ns = self._air_ns(Pivot) + self._air_ns(Answer)
        lengths = Lengths(self._air_ns(Telemetry), guard_ns, command_ns)
        made = plan(list(state.wishes.values()), lengths, self._channel.duty_percent)
        state.guard_ns, state.planned = guard_ns, True
        state.places = dict(zip(state.wishes, made.places, strict=False))
        if made != state.last:
            state.last = made
            self._news.append(NewPlan(link, len(state.wishes), made))

    def _wants(self, module: ModuleView, place: Place, guard_ns: int, seen: _Seen) -> bool:
        """Whether a module has to be given its slot, for the first time or again."""
        given = self._given.get(module.module)
        if given is None or (given.boot, given.place) != (module.boot, place):
            return True
        clock, report_ms = seen.clock_of(module.module), seen.report_of(module.module)
        t_ns, period_ns = seen.t_ns, place.period_ms * NS_PER_MS
        if clock is None or t_ns < given.at_ns + 2 * period_ns:
            return False
        if report_ms is not None and report_ms != given.looked_ms:
            heard_ms = _fleet_ms_of(report_ms, clock, t_ns)
            given.looked_ms, given.heard_ns = report_ms, t_ns
            kept = _keeps(heard_ms, place, guard_ns // (2 * NS_PER_MS) + 1)
            given.misses = 0 if kept else given.misses + 1
            given.tries = 0 if kept else given.tries
        silent = t_ns - given.heard_ns >= (MISSES + 1) * period_ns + LOOK_NS
        patience_ns = min(LOOK_NS << min(given.tries, 6), LONGEST_WAIT_NS)
        lost = given.misses >= MISSES or silent
        return lost and t_ns - given.at_ns >= patience_ns

    def _next(self, state: _Link, ours: dict[int, ModuleView], t_ns: int) -> int | None:
        """Who is next on a link, if its time has come; who is gone meanwhile is passed over."""
        while state.waiting and t_ns >= state.free_ns:
            module = state.waiting.popleft()
            if module in ours and module in state.places:
                state.free_ns = t_ns + SHARE_OF_AIR * self._air_ns(Slot)
                return module
        return None

    def _give(self, console: int, module: ModuleView, place: Place, t_ns: int) -> Saying:
        before = self._given.get(module.module)
        again = before is not None and (before.boot, before.place) == (module.boot, place)
        tries = before.tries + 1 if before is not None and again else 1
        self._given[module.module] = _Given(module.boot, place, t_ns, t_ns, tries)
        bits = identity_bits(module.identity)
        slot = Slot(console, module.boot, place.period_ms, bits, place.phase_ms)
        return Saying(module.link, module.address, slot)


def _wishes(on: Iterable[ModuleView]) -> dict[int, int]:
    """How often each module is to report, by what was read of its settings; one that was not asked
    yet is taken for the shortest of the others. Empty before any was."""
    read = {each.module: dict(each.settings).get(SettingId.TELEMETRY_PERIOD_MS) for each in on}
    shortest_ms = min((each for each in read.values() if each is not None), default=None)
    if shortest_ms is None:
        return {}
    return {module: shortest_ms if ms is None else ms for module, ms in read.items()}


def _fleet_ms_of(report_ms: int, clock: ModuleClock, t_ns: int) -> int:
    """Fleet time of something that was a little while ago, told in module time modulo 2**32."""
    now_ms = clock.module_time_ns(t_ns) // NS_PER_MS
    return (fleet_ms(t_ns) - (now_ms - report_ms) % _WRAP) % _WRAP


def _keeps(heard_ms: int, place: Place, doubt_ms: int) -> bool:
    """Whether a report made at this fleet time is in its slot, give or take the doubt."""
    after_ms = (heard_ms - place.phase_ms) % place.period_ms
    return min(after_ms, place.period_ms - after_ms) <= doubt_ms
