"""What a console says by itself to keep a fleet drivable: permits, clock probes, bridge questions.

Owns three schedules. Time is an argument; nothing is sent here: what is due comes back as Saying.
The figures are those of WIRE.md, "Clock" and "Drive permit". Knows modules only as pictures, and
their clocks as the reducer keeps them.
"""

from collections.abc import Callable, Iterable, Sequence
from typing import Final, NamedTuple

from console.limits import NS_PER_MS, Limits
from console.view import ModuleView
from protocol.clock import ModuleClock
from protocol.codes import BRIDGE_ADDRESS, EVERYONE_ADDRESS, Flags, identity_bits
from protocol.message import BOUND_UNKNOWN, BridgeAsk, Message, Permit, Probe

PROBE_HASTE_NS: Final = 250 * NS_PER_MS
PROBE_CALM_NS: Final = 5_000 * NS_PER_MS
EXCHANGES_WANTED: Final = 4
BRIDGE_PERIOD_NS: Final = 2_000 * NS_PER_MS

_U16: Final = 0xFFFF
_U32: Final = 0xFFFF_FFFF
_TOLD: Final = int(Flags.CLOCK_TOLD)

ClockOf = Callable[[int], ModuleClock | None]
"""The clock of the module of this count, None before its first exchange."""


class Saying(NamedTuple):
    """A message that is due on a link, and whether it goes ahead of what waits there."""

    link: int
    address: int
    message: Message
    urgent: bool = False


def fleet_ms(t_ns: int) -> int:
    """Session time as it stands on the wire: milliseconds modulo 2**32."""
    return t_ns // NS_PER_MS & _U32


class PermitKeeper:
    """Renews the drive permit while the heart of a screen or a running sheet beats."""

    def __init__(self, limits: Limits) -> None:
        self._limits = limits
        self._beat_ns: int | None = None
        self.next_ns: int | None = None

    def beat(self, t_ns: int) -> None:
        """A sign of life, as of ``t_ns``."""
        if self._beat_ns is None or t_ns > self._beat_ns:
            self._beat_ns = t_ns
            if self.next_ns is None:
                self.next_ns = t_ns

    def alive(self, t_ns: int) -> bool:
        """Whether the last sign of life is recent enough for wheels to turn."""
        return self._beat_ns is not None and t_ns < self._beat_ns + self._limits.permit_ns

    def due(self, console: int, links: Iterable[int], t_ns: int) -> list[Saying]:
        """The permit, to everyone on every link, where it is time to renew it."""
        if self._beat_ns is None or self.next_ns is None or t_ns < self.next_ns:
            return []
        if not self.alive(t_ns):
            self.next_ns = None  # the next sign of life begins anew
            return []
        self.next_ns = t_ns + self._limits.renewal_ns
        permit = Permit(console, fleet_ms(self._beat_ns + self._limits.permit_ns))
        return [Saying(link, EVERYONE_ADDRESS, permit, urgent=True) for link in links]


class ProbeKeeper:
    """Asks modules for their clocks, and tells each what is made of its clock. ``gap_ns``: from one
    Probe to the next at least, where the channel is known and carries no more; who waited longest
    is asked first."""

    def __init__(self, limits: Limits, gap_ns: int = 0) -> None:
        self._limits = limits
        self._gap_ns = gap_ns
        self._due_ns: dict[int, int] = {}
        self._boots: dict[int, int] = {}
        self._sequence = 0
        self._free_ns = 0
        self.next_ns: int | None = None

    def due(
        self, console: int, modules: Sequence[ModuleView], clock_of: ClockOf, t_ns: int
    ) -> list[Saying]:
        """Probes for the modules whose time it is; a restarted one is probed at once."""
        known = len(modules) == len(self._boots)
        if known and self.next_ns is not None and t_ns < self.next_ns:
            return []
        sayings = []
        for module in self._waiting(modules, t_ns):
            clock = clock_of(module.module)
            sayings.append(self._probe(console, module, clock, t_ns))
            calm = clock is not None and self._settled(clock, module, t_ns)
            period_ns = PROBE_CALM_NS if calm else PROBE_HASTE_NS
            self._due_ns[module.module] = t_ns + period_ns
        if sayings:
            self._free_ns = t_ns + self._gap_ns
        soonest_ns = min(self._due_ns.values(), default=t_ns + PROBE_HASTE_NS)
        self.next_ns = min(max(soonest_ns, self._free_ns), t_ns + PROBE_HASTE_NS)  # for restarts
        return sayings

    def _waiting(self, modules: Sequence[ModuleView], t_ns: int) -> Sequence[ModuleView]:
        """Whose time has come: all of them, or where there is a gap to keep, who waited longest."""
        for module in modules:
            if self._boots.get(module.module) != module.boot:
                self._boots[module.module] = module.boot
                self._due_ns[module.module] = t_ns
        due = [each for each in modules if self._due_ns[each.module] <= t_ns]
        if not self._gap_ns or not due:
            return due
        if t_ns < self._free_ns:
            return []
        return [min(due, key=lambda each: self._due_ns[each.module])]

    def _settled(self, clock: ModuleClock, module: ModuleView, t_ns: int) -> bool:
        known = clock.known(t_ns, self._limits.clock_bound_ns)
        return known and clock.exchanges >= EXCHANGES_WANTED and bool(module.flags & _TOLD)

    def _probe(
        self, console: int, module: ModuleView, clock: ModuleClock | None, t_ns: int
    ) -> Saying:
        self._sequence = (self._sequence + 1) & _U16
        offset_ms, bound_ms = (0, BOUND_UNKNOWN) if clock is None else told(clock, t_ns)
        bits = identity_bits(module.identity)
        probe = Probe(console, module.boot, self._sequence, bits, offset_ms, bound_ms)
        return Saying(module.link, module.address, probe)


def told(clock: ModuleClock, t_ns: int) -> tuple[int, int]:
    """What a Probe tells a module of its clock: offset in ms modulo 2**32, and its bound, rounded
    up, with one more for the rounding of the offset; BOUND_UNKNOWN where it has no room."""
    offset_ms = round(clock.offset_ns(t_ns) / NS_PER_MS) & _U32
    bound_ms = -(-clock.bound_ns(t_ns) // NS_PER_MS) + 1
    return offset_ms, min(bound_ms, BOUND_UNKNOWN)


def latest_start_ms(clock: ModuleClock, t_ns: int) -> int:
    """A fleet time as the module time after which a motion must not start: never later than the
    truth, whatever the error within the bound."""
    return (clock.module_time_ns(t_ns) - clock.bound_ns(t_ns)) // NS_PER_MS & _U32


class BridgeAsker:
    """Asks each link's bridge how it is; who does not answer is a transparent modem."""

    def __init__(self) -> None:
        self._sequence = 0
        self.next_ns: int = 0

    def due(self, links: Iterable[int], t_ns: int) -> list[Saying]:
        """The question, for each link, where it is time."""
        if t_ns < self.next_ns:
            return []
        self.next_ns = t_ns + BRIDGE_PERIOD_NS
        self._sequence = (self._sequence + 1) & _U16
        return [Saying(link, BRIDGE_ADDRESS, BridgeAsk(self._sequence)) for link in links]
