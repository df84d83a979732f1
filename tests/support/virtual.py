"""A session's core against a simulated fleet, in virtual time on one thread.

No clock and no thread: time goes from event to event, so that an hour takes a moment and one
seed gives one history.
"""

from collections.abc import Callable, Sequence

from console.airtime import Channel
from console.core import SessionCore
from console.link import Outbox
from console.orders import parse_order
from console.sealing import ConsoleSeal
from protocol.pacing import LinePacer
from protocol.seal import KeyRing
from sim_link.options import SimOptions
from sim_link.tally import TallyEntry
from sim_link.world import World
from storage.records import LinkChanged, OrderGiven, Record, SessionOpened
from storage.rows import Row
from tests.support.heart import drivable

SECOND_NS = 1_000_000_000
GRAIN_NS = 1_000_000


class MemoryLog:
    """A log in memory. It answers each commit at once with ``why_not``, or holds the answers in
    ``held`` where that is a list; as the real one, it keeps what it refused to commit."""

    def __init__(self) -> None:
        self.records: list[tuple[int, Record]] = []
        self.rows: list[Row] = []
        self.events: list[str] = []
        self.why_not = ""
        self.held: list[Callable[[str], None]] | None = None

    def append(self, number: int, record: Record, rows: Sequence[Row]) -> None:
        self.events.append(f"append {type(record).__name__}")
        self.records.append((number, record))
        self.rows.extend(rows)

    def commit(
        self, number: int, record: Record, rows: Sequence[Row], done: Callable[[str], None]
    ) -> None:
        self.events.append(f"commit {type(record).__name__}")
        self.records.append((number, record))
        self.rows.extend(rows)
        if self.held is None:
            done(self.why_not)
        else:
            self.held.append(done)

    def trouble(self) -> str:
        return ""


class VirtualSession:
    """One console and one simulated fleet, moved together by ``run_until``."""

    def __init__(
        self,
        options: SimOptions | None = None,
        epoch: int = 1_000_000,
        keys: KeyRing | None = None,
        channel: Channel | None = None,
    ) -> None:
        self.keys = keys
        self.channel = channel
        self.tally: list[TallyEntry] = []
        self.world = World(options or SimOptions(seed=11), self.tally.append)
        self.log = MemoryLog()
        self.now_ns = 0
        self.waiting: list[tuple[OrderGiven, str]] = []
        self.frozen = False
        """Whether the screen gives no sign of life."""
        self.consoles = 0
        self.reconnect(epoch)

    def reconnect(self, epoch: int) -> None:
        """A new console on the same fleet, as after a crash: with a number of its own."""
        self.consoles += 1
        self.log = MemoryLog()
        seal = None if self.keys is None else ConsoleSeal(self.keys, epoch, lambda opening: None)
        outboxes = [Outbox(LinePacer(921_600))]
        self.core = SessionCore(outboxes, self.log, self._answer, seal, channel=self.channel)
        sealed = seal is not None
        opened = SessionOpened(
            t_ns=self.now_ns,
            utc="2026-01-01T00:00:00Z",
            operator="Ida",
            epoch=epoch,
            pace=1.0,
            program="test",
            sealed=sealed,
            console=self.consoles,
        )
        self.core.note(opened)
        self.core.note(LinkChanged(self.now_ns, 0, "sim://", "open", ""))

    def _answer(self, given: OrderGiven, why_not: str) -> None:
        self.waiting.append((given, why_not))

    def order(self, text: str) -> OrderGiven:
        """Give a typed order now."""
        names = [module.name for module in self.core.fleet.modules()]
        return self.core.give(parse_order(text, names), "typed", self.now_ns)

    def run_until(self, t_ns: int, done: Callable[[], bool] = lambda: False) -> bool:
        """Move both sides to ``t_ns``, or until ``done``; returns whether it was."""
        while self.now_ns < t_ns:
            if done():
                return True
            self._turn()
            wakes = [t_ns, self.core.next_wake_ns(self.now_ns)]
            if self.world.next_event_ns is not None:
                wakes.append(self.world.next_event_ns)
            self.now_ns = max(min(wakes), self.now_ns + GRAIN_NS)
        self._turn()
        return done()

    def _turn(self) -> None:
        data = self.world.read(self.now_ns)
        if data:
            self.core.arrived(0, data, self.now_ns)
        waiting, self.waiting = self.waiting, []
        for given, why_not in waiting:
            self.core.committed(given, why_not, self.now_ns)
        if not self.frozen:
            self.core.beat(self.now_ns)
        self.core.wake(self.now_ns)
        for _, frame in self.core.to_write(self.now_ns):
            self.world.write(frame, self.now_ns)

    def run_for(self, seconds: float, done: Callable[[], bool] = lambda: False) -> bool:
        """Move both sides on by so many seconds."""
        return self.run_until(self.now_ns + int(seconds * SECOND_NS), done)

    def until_drivable(self, modules: int = 8) -> bool:
        """Move on until so many modules are known in full, follow this console, and hold its
        permit; returns whether they do within a minute."""
        return self.run_for(60, lambda: drivable(self.view, modules))

    def settle(self) -> None:
        """Move on until no command is open."""
        self.run_for(60, lambda: not self.core.fleet.open_commands() and not self.waiting)

    @property
    def view(self):  # type: ignore[no-untyped-def]
        """A picture of the fleet now."""
        return self.core.view(self.now_ns)
