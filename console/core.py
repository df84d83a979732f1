"""The session's core: everything the engine decides, with time as an argument and no threads.

Owns the reducer, the exchange, the outboxes and the count of records, so that the same code
runs under the engine's thread in real time and on one thread in virtual time. A command goes
out only when the log has said that it is durable (law 3); bytes, timers, rest and all-stop do
not wait for that.

Must not know: threads, clocks, screens, sheets, SQL.
"""

from collections.abc import Callable, Sequence
from functools import partial
from typing import Final, Protocol

from console.errors import InputError
from console.fleet import FleetReducer, Step
from console.interlocks import blocking
from console.link import Outbox
from console.orders import Order, render
from console.planning import build_commands, resolve, to_message
from console.sealing import ConsoleSeal
from console.standing import RollCaller, StopKeeper, unexplained
from console.view import CommandView, FleetView, ModuleView
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.exchange import CommandExchange, Ended, Ending, Send
from protocol.frame import frame
from protocol.message import (
    Clear,
    Message,
    Packet,
    Presence,
    Query,
    Rest,
    RollCall,
    Stop,
    encode,
)
from storage.records import (
    BytesIn,
    BytesOut,
    CommandExpired,
    EpochChosen,
    FramesRefused,
    OrderGiven,
    OrderVoided,
    Record,
    StopLifted,
    StopPressed,
)
from storage.rows import Row

OnEnd = Callable[[CommandView, ModuleView], None]
"""Told of a command's end, with its module as it stands at that moment."""
IDLE_NS: Final = 500_000_000
LINK_SHIFT: Final = 16
"""A destination in the exchange is link and address in one integer."""


class Recorder(Protocol):
    """What the core needs of a log; storage.writer.LogWriter is one."""

    def append(self, number: int, record: Record, rows: Sequence[Row]) -> None:
        """Take a record; it is written soon."""
        ...

    def commit(
        self, number: int, record: Record, rows: Sequence[Row], done: Callable[[str], None]
    ) -> None:
        """Take a record; ``done("")`` once it is durable, ``done(why_not)`` where it cannot be."""
        ...

    def trouble(self) -> str:
        """Why nothing is written now, or an empty text."""
        ...


class SessionCore:
    """One session over ``outboxes``, one a link.

    ``answer(given, why_not)`` is called on the log's thread once the log has answered on an
    order; whoever runs the core brings it over to its own thread and calls ``committed``.
    ``seal`` None: frames are not sealed.
    """

    def __init__(
        self,
        outboxes: Sequence[Outbox],
        log: Recorder,
        answer: Callable[[OrderGiven, str], None],
        seal: ConsoleSeal | None = None,
    ) -> None:
        self._seal = seal
        self.fleet = FleetReducer()
        self._outboxes = list(outboxes)
        self._log = log
        self._answer = answer
        self._exchange = CommandExchange()
        self._roll = RollCaller()
        self._stops = StopKeeper()
        self._record_number = 0
        self._order_number = 0
        self._command_number = 0
        self._wire_numbers: dict[int, int] = {}
        self._on_end: dict[int, OnEnd] = {}
        self.open_links = set(range(len(self._outboxes)))

    # -- records -------------------------------------------------------------------------

    def note(self, record: Record) -> Step:
        """Number a record, fold it into the fleet, and pass it to the log."""
        number, step = self._apply(record)
        self._log.append(number, record, step.rows)
        return step

    def _apply(self, record: Record) -> tuple[int, Step]:
        self._record_number += 1
        step = self.fleet.apply(self._record_number, record)
        for command in step.ended:
            self._tell_end(command)
        return self._record_number, step

    def _tell_end(self, command: int) -> None:
        on_end = self._on_end.pop(command, None)
        view = self.fleet.command(command)
        module = self.fleet.module(view.module) if view is not None else None
        if on_end is not None and view is not None and module is not None:
            on_end(view, module)

    # -- what happens --------------------------------------------------------------------

    def arrived(self, link: int, data: bytes, t_ns: int) -> None:
        """Take bytes from a link."""
        if self._seal is not None:
            pieces, faults = self._seal.judge(link, data)
            if pieces:
                self.note(FramesRefused(t_ns, link, pieces, faults))
        step = self.note(BytesIn(t_ns, link, data))
        for from_link, packet in step.packets:
            source = from_link << LINK_SHIFT | packet.source
            self._effects(self._exchange.receive(source, packet.message, t_ns), t_ns)
            if isinstance(packet.message, Presence):
                self._prove(from_link, packet.source, packet.message.boot)
        if self.fleet.highest_epoch > self.fleet.epoch:
            self.note(EpochChosen(t_ns, self.fleet.highest_epoch + 1))
            if self._seal is not None:
                self._seal.set_epoch(self.fleet.epoch)
            self._roll.hurry()

    def give(
        self, order: Order, source: str, t_ns: int, trial: int = 0, on_end: OnEnd | None = None
    ) -> OrderGiven:
        """Take an order: all of it, or none. Raises InputError with the reason for none.

        ``on_end`` is called once for each of its commands.
        """
        modules = resolve(order, self.fleet.modules())
        self._check(order, modules, t_ns)
        self._order_number += 1
        commands = build_commands(
            order,
            modules,
            last_command=self._command_number,
            numbers=self._wire_numbers,
            epoch=self.fleet.epoch,
            trial=trial,
        )
        self._command_number += len(commands)
        given = OrderGiven(t_ns, self._order_number, render(order), source, commands)
        if on_end is not None:
            self._on_end.update((each.command, on_end) for each in commands)
        self._record_order(given, wait=order.motion != "rest")
        return given

    def _check(self, order: Order, modules: Sequence[ModuleView], t_ns: int) -> None:
        fleet = self.fleet.view(t_ns)
        trouble = self._log.trouble()
        blocks = [
            f"{module.name}: {block.text}"
            for module in modules
            for block in blocking(module, order, fleet, trouble)
        ]
        if blocks:
            raise InputError("; ".join(blocks))

    def _record_order(self, given: OrderGiven, wait: bool) -> None:
        number, step = self._apply(given)
        if wait:
            done = partial(self._answer, given)
            self._log.commit(number, given, step.rows, done)
        else:
            self._log.append(number, given, step.rows)
            self._rest(given)

    def _rest(self, given: OrderGiven) -> None:
        """Send rests at once; they take the place of whatever those modules still had to do."""
        for planned in given.commands:
            module = self.fleet.module(planned.module)
            if module is not None:
                self._outboxes[module.link].drop_plain(module.address)
                self._effects(self._exchange.withdraw(_destination(module)), given.t_ns)
        self._send(given, given.t_ns)

    def committed(self, given: OrderGiven, why_not: str, t_ns: int) -> None:
        """The log's answer on an order: send its commands, or end them as refused.

        A log that refused an order keeps it, to write it once it can: what was asked for is
        part of the session, and so is that it was not done.
        """
        if why_not:
            self.note(OrderVoided(t_ns, given.order, why_not))
        else:
            self._send(given, t_ns)

    def stop_all(self, source: str, t_ns: int) -> int:
        """All-stop: at the head of every link, before anything else is thought about."""
        stop_number = self.fleet.newest_stop + 1
        for outbox in self._outboxes:
            outbox.drop_plain()
        self._broadcast(Stop(stop_number), urgent=True)
        self.note(StopPressed(t_ns, stop_number, source))
        for module in self.fleet.modules():
            self._effects(self._exchange.withdraw(_destination(module)), t_ns)
        self._stops.hurry(t_ns)
        return stop_number

    def lift_stop(self, stop_number: int, source: str, t_ns: int) -> None:
        """Clear the newest all-stop. Raises InputError where another one is in force, or none."""
        stop = self.fleet.view(t_ns).stop
        if not stop.in_force:
            raise InputError("no all-stop is in force")
        if stop_number != stop.stop_number:
            raise InputError(f"the all-stop in force is number {stop.stop_number}; clear that one")
        self.note(StopLifted(t_ns, stop_number, source))
        self._broadcast(Clear(stop_number), urgent=True)
        self._stops.hurry(t_ns)

    # -- time ----------------------------------------------------------------------------

    def wake(self, t_ns: int) -> None:
        """Do what is due by now."""
        self._effects(self._exchange.wake(t_ns), t_ns)
        if self._roll.due(self._strangers, t_ns):
            self._broadcast(RollCall(self.fleet.epoch))
        if self.fleet.newest_stop:
            self._repeat_stop(t_ns)

    def _strangers(self) -> bool:
        return unexplained(self.fleet.modules(), self.fleet.epoch, self.fleet.unknown_heard)

    def _repeat_stop(self, t_ns: int) -> None:
        for module in self._stops.due(lambda: self.fleet.view(t_ns), t_ns):
            stop = self.fleet.view(t_ns).stop
            again = Stop(stop.stop_number) if stop.in_force else Clear(stop.stop_number)
            if not stop.in_force:
                self._prove(module.link, module.address, module.boot, urgent=True)
            self._push(module.link, module.address, again, urgent=True)

    def next_wake_ns(self, t_ns: int) -> int:
        """When something is due next, at the latest after a short idle time."""
        wakes = [t_ns + IDLE_NS, self._roll.next_ns, self._stops.next_ns]
        wakes += [self._outboxes[link].next_ready_ns(t_ns) for link in self.open_links]
        wakes.append(self._exchange.next_wake_ns)
        return min(wake for wake in wakes if wake is not None)

    def to_write(self, t_ns: int) -> list[tuple[int, bytes]]:
        """Frames that the wires have room for now, recorded as sent; write them at once."""
        ready = []
        for link in sorted(self.open_links):
            while (data := self._outboxes[link].pop_ready(t_ns)) is not None:
                self.note(BytesOut(t_ns, link, data))
                ready.append((link, data))
        return ready

    def view(self, t_ns: int) -> FleetView:
        """A picture of the fleet at this moment."""
        return self.fleet.view(t_ns)

    # -- sending -------------------------------------------------------------------------

    def _send(self, given: OrderGiven, t_ns: int) -> None:
        for planned in given.commands:
            module = self.fleet.module(planned.module)
            view = self.fleet.command(planned.command)
            if module is None or view is None or view.ending:
                continue  # all-stop or a restart ended it while the log was writing
            effects = self._exchange.submit(
                planned.command, _destination(module), to_message(planned), t_ns
            )
            self._effects(effects, t_ns)

    def _effects(self, effects: Sequence[Send | Ended], t_ns: int) -> None:
        for effect in effects:
            if isinstance(effect, Send):
                link, address = divmod(effect.destination, 1 << LINK_SHIFT)
                self._push(link, address, effect.message, urgent=isinstance(effect.message, Rest))
            elif effect.how is Ending.UNSEEN:
                view = self.fleet.command(effect.command)
                if view is not None and not view.ending:
                    self.note(CommandExpired(t_ns, effect.command))

    def _broadcast(self, message: Message, urgent: bool = False) -> None:
        for link in sorted(self.open_links):
            self._push(link, EVERYONE_ADDRESS, message, urgent)

    def _prove(self, link: int, address: int, boot: int, urgent: bool = False) -> None:
        """Show a sealed module that its boot number is known: a question about no command. What
        it obeys before that is little (WIRE.md, "After a restart")."""
        if self._seal is not None:
            self._push(link, address, Query(self.fleet.epoch, boot, 0), urgent)

    def _push(self, link: int, address: int, message: Message, urgent: bool = False) -> None:
        payload = encode(Packet(address, CONSOLE_ADDRESS, message))
        if self._seal is not None:
            payload = self._seal.seal(payload)
        self._outboxes[link].push(address, frame(payload), urgent)


def _destination(module: ModuleView) -> int:
    return module.link << LINK_SHIFT | module.address
