"""The session's core: everything the engine decides, with time as an argument and no threads.

Owns the reducer, the exchange, the outboxes and the count of records, so that the same code
runs under the engine's thread in real time and on one thread in virtual time. A command goes
out only when the log has said that it is durable (law 3); bytes, timers, rest and all-stop do
not wait for that.

Must not know: threads, clocks, screens, sheets, SQL.
"""

from collections.abc import Callable, Sequence
from functools import partial
from typing import Final

from console.airtime import Channel
from console.chores import Chores
from console.errors import InputError
from console.fetching import ANSWER_BYTES
from console.fleet import FleetReducer, Step
from console.interlocks import Case, blocking
from console.limits import Limits
from console.link import Outbox
from console.orders import Order, render
from console.planning import Plan, build_commands, resolve, to_message
from console.recorder import Recorder
from console.sealing import ConsoleSeal
from console.sender import Sender
from console.slots import NewPlan, SlotKeeper
from console.standing import RollCaller, StopKeeper, unexplained
from console.upkeep import fleet_ms
from console.view import CommandView, FleetView, ModuleView
from protocol.exchange import AHEAD, CommandExchange, Ended, Ending, Send
from protocol.message import (
    Clear,
    Presence,
    Query,
    Release,
    RollCall,
    Stop,
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
    SlotsPlanned,
    StageStarted,
    StopLifted,
    StopPressed,
)

_AT_ONCE: Final = frozenset({"rest", "lock"})
"""Orders that take a danger away: they wait neither for the log nor for what is in hand."""
OnEnd = Callable[[CommandView, ModuleView], None]
"""Told of a command's end, with its module as it stands at that moment."""
IDLE_NS: Final = 500_000_000
_DEFAULT_LIMITS: Final = Limits()
LINK_SHIFT: Final = 16
"""A destination in the exchange is link and address in one integer."""


class SessionCore:
    """One session over ``outboxes``, one a link.

    ``answer(given, why_not)`` is called on the log's thread once the log has answered on an
    order; whoever runs the core brings it over to its own thread and calls ``committed``.
    ``seal`` None: frames are not sealed. ``limits`` are those of the session's pace. ``channel``
    None: what the radio carries is not known, and no telemetry slots are handed out.
    """

    def __init__(
        self,
        outboxes: Sequence[Outbox],
        log: Recorder,
        answer: Callable[[OrderGiven, str], None],
        seal: ConsoleSeal | None = None,
        limits: Limits = _DEFAULT_LIMITS,
        *,
        channel: Channel | None = None,
    ) -> None:
        self._seal = seal
        self._limits = limits
        self.fleet = FleetReducer()
        self._sender = Sender(outboxes, seal)
        self._log = log
        self._answer = answer
        self._exchange = CommandExchange(limits.resend)
        self._roll = RollCaller()
        self._stops = StopKeeper()
        answer_ns = max((each.line_ns(ANSWER_BYTES) for each in outboxes), default=0)
        slots = None if channel is None else SlotKeeper(channel, seal is not None)
        self._channel = channel
        self._chores = Chores(limits, self._owes_answer, answer_ns, slots)
        self._record_number = 0
        self._order_number = 0
        self._command_number = 0
        self._wire_numbers: dict[int, int] = {}
        self._on_end: dict[int, OnEnd] = {}

    @property
    def open_links(self) -> set[int]:
        """Links that can be written to; whoever loses one takes it out."""
        return self._sender.open_links

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
        if self.fleet.highest_epoch >= self.fleet.epoch:
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
        stage = self._chores.stages.new_stage() if order.together else 0
        plan = Plan(self.fleet.epoch, trial, stage, t_ns + self._limits.start_within_ns)
        commands = build_commands(
            order,
            modules,
            plan,
            last_command=self._command_number,
            numbers=self._wire_numbers,
            clock_of=self.fleet.clock,
        )
        self._command_number += len(commands)
        given = OrderGiven(t_ns, self._order_number, render(order), source, commands)
        if on_end is not None:
            self._on_end.update((each.command, on_end) for each in commands)
        if stage:
            self._chores.stages.wait_for(given.order, stage, [each.command for each in commands])
        self._record_order(given, wait=order.motion not in _AT_ONCE)
        return given

    def _check(self, order: Order, modules: Sequence[ModuleView], t_ns: int) -> None:
        fleet = self.fleet.view(t_ns)
        trouble = self._log.trouble()
        alive = self._chores.permits.alive(t_ns)
        blocks = [
            f"{module.name}: {block.text}"
            for module in modules
            for block in blocking(Case(module, order, fleet, trouble, self._limits, alive))
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
            self._send_ahead(given)

    def _send_ahead(self, given: OrderGiven) -> None:
        """Send rests and lock-outs at once; they take the place of whatever those modules still
        had to do."""
        for planned in given.commands:
            module = self.fleet.module(planned.module)
            if module is not None:
                self._sender.drop_plain(module.link, module.address)
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
        self._sender.drop_plain()
        self._sender.broadcast(Stop(stop_number), urgent=True)
        self._chores.stages.abandon_all()
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
        self._sender.broadcast(Clear(stop_number), urgent=True)
        self._stops.hurry(t_ns)

    # -- time ----------------------------------------------------------------------------

    def beat(self, t_ns: int) -> None:
        """A sign of life of the screen or of the running sheet: permits count from it."""
        self._chores.permits.beat(t_ns)

    def release(self) -> None:
        """The session ends in order: let go of the modules, so that they wait for no permit."""
        self._sender.broadcast(Release(self.fleet.console), urgent=True)

    def wake(self, t_ns: int) -> None:
        """Do what is due by now."""
        self._effects(self._exchange.wake(t_ns), t_ns)
        if self._roll.due(lambda: self._strangers(t_ns), t_ns):
            self._sender.broadcast(RollCall(self.fleet.epoch, self.fleet.console))
        if self.fleet.newest_stop:
            self._repeat_stop(t_ns)
        for news in self._chores.news(self.fleet, t_ns):
            start_ms = None if news.start_ns is None else fleet_ms(news.start_ns)
            self.note(StageStarted(t_ns, news.order, start_ms))
        self._sender.say(self._chores.due(self.fleet, sorted(self.open_links), t_ns))
        for planned in self._chores.plans():
            self._note_plan(planned, t_ns)

    def _note_plan(self, planned: NewPlan, t_ns: int) -> None:
        link, modules, plan = planned
        if self._channel is not None:
            rate_bps, duty_percent = self._channel.air_rate_bps, self._channel.duty_percent
            figures = plan.seldom, plan.asked_ms, plan.period_ms, round(plan.load * 100, 2)
            self.note(SlotsPlanned(t_ns, link, rate_bps, duty_percent, modules, *figures))

    def _owes_answer(self, module: ModuleView) -> bool:
        return self._exchange.awaits_answer(_destination(module))

    def _strangers(self, t_ns: int) -> bool:
        return unexplained(self.fleet.view(t_ns), self.fleet.unknown_heard)

    def _repeat_stop(self, t_ns: int) -> None:
        for module in self._stops.due(lambda: self.fleet.view(t_ns), t_ns):
            stop = self.fleet.view(t_ns).stop
            again = Stop(stop.stop_number) if stop.in_force else Clear(stop.stop_number)
            if not stop.in_force:
                self._prove(module.link, module.address, module.boot, urgent=True)
            self._sender.push(module.link, module.address, again, urgent=True)

    def next_wake_ns(self, t_ns: int) -> int:
        """When something is due next, at the latest after a short idle time."""
        wakes = [t_ns + IDLE_NS, self._roll.next_ns, self._stops.next_ns]
        wakes += self._sender.next_ready_ns(t_ns)
        wakes += self._chores.wakes_ns()
        wakes.append(self._exchange.next_wake_ns)
        return min(wake for wake in wakes if wake is not None)

    def to_write(self, t_ns: int) -> list[tuple[int, bytes]]:
        """Frames that the wires have room for now, recorded as sent; write them at once."""
        ready = list(self._sender.ready(t_ns))
        for link, data in ready:
            self.note(BytesOut(t_ns, link, data))
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
                self._sender.push(
                    link, address, effect.message, urgent=isinstance(effect.message, AHEAD)
                )
            elif effect.how is Ending.UNSEEN:
                view = self.fleet.command(effect.command)
                if view is not None and not view.ending:
                    self.note(CommandExpired(t_ns, effect.command))

    def _prove(self, link: int, address: int, boot: int, urgent: bool = False) -> None:
        self._sender.prove(link, address, Query(self.fleet.epoch, boot, 0), urgent)


def _destination(module: ModuleView) -> int:
    return module.link << LINK_SHIFT | module.address
