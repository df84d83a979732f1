"""Two consoles, three modules, and an air that does its worst: where law 1 is searched for
exceptions.

Everything runs in virtual time on one thread, in real frames of bytes, from seeds. The consoles
know nothing of each other: each has its own exchange, its epoch and its drawn number, renews its
permit while it is busy, falls silent for a while so that the other may take the modules over, and
restarts now and then with everything forgotten.
"""

import random
from collections import Counter
from collections.abc import Sequence

from protocol.allegiance import Allegiance
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS, identity_bits
from protocol.command_memory import CommandMemory, next_number
from protocol.exchange import CommandExchange, Ended, Ending, Send
from protocol.message import (
    Command,
    Echo,
    Message,
    Packet,
    Permit,
    Pivot,
    Presence,
    Release,
    Rest,
    RollCall,
    Telemetry,
)
from tests.support.air import CLEAR_SKY, FAIR, FOUL, MS, SLOW, Air, Clock, Weather
from tests.support.exchange_boxes import Box, Deeds, Key, Parts, key_of
from tests.support.told_clocks import ToldClocks

__all__ = ["CLEAR_SKY", "FAIR", "FOUL", "SLOW", "Weather", "World"]

ADDRESSES = (0x10, 0x11, 0x12)
PERMIT_MS, TICK_MS = 1_000, 250


class Console:
    """One console, from its opening to its restart."""

    def __init__(self, world: "World", place: int, number: int, epoch: int) -> None:
        self.world, self.place, self.number, self.epoch = world, place, number, epoch
        self.exchange = CommandExchange()
        self.boots: dict[int, int] = {}
        """Of the modules that follow it, as far as it knows."""
        self._heard: dict[int, int] = {}
        """Newest boot of each module, whomever it follows: all are asked for their clocks."""
        self.highest_epoch = 0
        self.closed = False
        self.active = True
        # Sessions were opened at different times, so their fleet times differ by minutes.
        self._clocks = ToldClocks(number, world.clock.t_ns - world.rng.randrange(300_000) * MS)
        self._turn_ns = world.clock.t_ns + world.rng.randrange(1_000, 8_000) * MS
        self._wake_ns = -1
        self._numbers = dict.fromkeys(ADDRESSES, 65_500)
        for address in ADDRESSES:
            world.clock.after(world.rng.randrange(100), lambda a=address: self._order(a))  # type: ignore[misc]
        world.clock.after(world.rng.randrange(TICK_MS), self._tick)

    @property
    def busy(self) -> bool:
        return any(self.exchange.busy(address) for address in ADDRESSES)

    def _tick(self) -> None:
        """Four times a second: permit, roll call, probes; now and then a rest or a restart."""
        world = self.world
        if self.closed or world.over:
            return
        if world.clock.t_ns >= self._turn_ns and (world.consoles_count > 1 or not self.active):
            self._change_sides()
        if self.active:
            self._upkeep()
        if world.rng.random() < world.weather.console_restart:
            world.restart_console(self)
            return
        world.clock.after(TICK_MS, self._tick)

    def _change_sides(self) -> None:
        """Fall silent, with or without a word, or begin again."""
        self.active = not self.active
        rng = self.world.rng
        wait_ms = rng.randrange(2_000, 15_000) if self.active else rng.randrange(500, 6_000)
        self._turn_ns = self.world.clock.t_ns + wait_ms * MS
        if not self.active and rng.random() < 0.5:
            self._to_all(Release(self.number))

    def _upkeep(self) -> None:
        fleet_ms = self._clocks.fleet_ms(self.world.clock.t_ns)
        self._to_all(Permit(self.number, fleet_ms + PERMIT_MS))
        if self.highest_epoch >= self.epoch:
            self._take_epoch(self.highest_epoch + 1)
        elif len(self.boots) < len(ADDRESSES):
            self._to_all(RollCall(self.epoch, self.number))
        for address, boot in self._heard.items():
            bits = identity_bits(self.world.boxes[address].identity)
            probe = self._clocks.probe(address, boot, bits, self.world.clock.t_ns)
            if probe is not None:
                self._send(address, probe)

    def _take_epoch(self, epoch: int) -> None:
        self.epoch = epoch
        self.boots.clear()
        self._to_all(RollCall(self.epoch, self.number))

    def _order(self, address: int) -> None:
        """Give the next command; now and then withdraw, or take another epoch."""
        world, rng = self.world, self.world.rng
        if self.closed or len(world.sent) >= world.commands:
            return
        if rng.random() < 0.005 and self.active:
            self._take_epoch(self.epoch + 1)
        pause_ms = rng.choice((5, 50, 200, 400))
        if address in self.boots and self.active:
            self._submit(address)
            if rng.random() < 0.03:
                self._take(self.exchange.withdraw(address))
                pause_ms = 4000  # as after an all-stop: what is still in the air comes first
        world.clock.after(pause_ms, lambda: self._order(address))

    def _submit(self, address: int) -> None:
        world = self.world
        self._numbers[address] = number = next_number(self._numbers[address])
        envelope = (self.epoch, self.boots[address], number)
        bits = identity_bits(world.boxes[address].identity)
        message: Command = Pivot(*envelope, bits, 0, 0, 1, 1, world.rng.randrange(9000))
        if world.rng.random() < 0.15:
            message = Rest(*envelope, bits)
        command = world.enter(self, address, message)
        self._take(self.exchange.submit(command, address, message, world.clock.t_ns))

    def hear(self, packet: Packet) -> None:
        if self.closed:
            return
        message, source = packet.message, packet.source
        if isinstance(message, Presence | Telemetry):
            self._heard[source] = message.boot
        if isinstance(message, Presence):
            self._take_presence(source, message)
        elif isinstance(message, Echo):
            self._clocks.echo(source, message, self.world.clock.t_ns)
        elif isinstance(message, Telemetry) and message.boot != self.boots.get(source):
            self.boots.pop(source, None)
        self._take(self.exchange.receive(source, message, self.world.clock.t_ns))

    def _take_presence(self, source: int, presence: Presence) -> None:
        follows = (presence.epoch, presence.console)
        if follows == (self.epoch, self.number):
            self.boots[source] = presence.boot
        else:
            self.boots.pop(source, None)
            if follows[1] != self.number or follows[0] > self.epoch:
                self.highest_epoch = max(self.highest_epoch, presence.epoch)

    def _wake(self) -> None:
        if not self.closed:
            self._take(self.exchange.wake(self.world.clock.t_ns))

    def _take(self, steps: Sequence[Send | Ended]) -> None:
        for step in steps:
            if isinstance(step, Ended):
                self.world.ended[step.command].append(step.how)
            else:
                self._send(step.destination, step.message)
        wake_ns = self.exchange.next_wake_ns
        if wake_ns is not None and wake_ns != self._wake_ns:
            self._wake_ns = wake_ns
            self.world.clock.at(max(wake_ns, self.world.clock.t_ns), self._wake)

    def _send(self, address: int, message: Message) -> None:
        self.world.down[address].carry(Packet(address, CONSOLE_ADDRESS, message))

    def _to_all(self, message: Message) -> None:
        packet = Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, message)
        for address in ADDRESSES:
            self.world.down[address].carry(packet)


class World:
    """So many consoles and three boxes, from one seed."""

    def __init__(
        self,
        seed: int,
        weather: Weather,
        memory_type: type[CommandMemory] = CommandMemory,
        allegiance_type: type[Allegiance] = Allegiance,
        consoles: int = 2,
    ) -> None:
        self.rng = random.Random(seed)
        self.weather = weather
        self.clock = Clock()
        self.deeds = Deeds()
        self.commands = 0
        self.over = False
        self.sent: dict[int, tuple[int, Command]] = {}
        self.ended: dict[int, list[Ending]] = {}
        self.abandoned: set[int] = set()
        """Commands of consoles that restarted: nobody waits for their ends."""
        self.consoles_count = consoles
        self.console_restarts = 0
        self._commands_of: dict[Console, list[int]] = {}
        make = (self.clock, self.rng, weather)
        self.down = {a: Air(*make, lambda p, a=a: self.boxes[a].hear(p)) for a in ADDRESSES}  # type: ignore[misc]
        self._up = [
            {a: Air(*make, lambda p, c=c: self.consoles[c].hear(p)) for a in ADDRESSES}  # type: ignore[misc]
            for c in range(consoles)
        ]
        parts = Parts(memory_type, allegiance_type, weather.capacity)
        self.boxes = {a: Box(a, self.clock, self.deeds, self._carry_up, parts) for a in ADDRESSES}
        self.consoles = [self._open_console(place) for place in range(consoles)]

    def run(self, commands: int) -> "World":
        self.commands = commands
        for box in self.boxes.values():
            self._beat(box)
        self.clock.run(until=lambda: len(self.sent) >= commands and not self._busy())
        # Whatever is still in the air arrives after the last end has been told.
        self.over = True
        self.clock.drain(self.clock.t_ns + 5_000 * MS)
        return self

    def _busy(self) -> bool:
        return any(console.busy for console in self.consoles)

    def _carry_up(self, packet: Packet) -> None:
        for airs in self._up:
            airs[packet.source].carry(packet)

    def _open_console(self, place: int) -> Console:
        """Its epoch is its clock's seconds, which are a little off for the second console."""
        epoch = 1_000 + self.clock.t_ns // (1_000 * MS) - 2 * place
        return Console(self, place, self.rng.randrange(1, 1 << 32), epoch)

    def restart_console(self, console: Console) -> None:
        """It comes back with everything forgotten and another number."""
        console.closed = True
        self.console_restarts += 1
        open_ones = [each for each in self._commands_of.get(console, []) if not self.ended[each]]
        self.abandoned.update(open_ones)
        self.consoles[console.place] = self._open_console(console.place)

    def enter(self, console: Console, address: int, message: Command) -> int:
        """Note a command before it is sent; returns its name."""
        command = len(self.sent)
        self.sent[command] = (address, message)
        self.ended[command] = []
        self.deeds.senders.setdefault(key_of(address, message), set()).add(console.number)
        self._commands_of.setdefault(console, []).append(command)
        return command

    def _beat(self, box: Box) -> None:
        now_ns = self.clock.t_ns
        if now_ns >= box.deaf_until_ns:
            box.say(box.telemetry())
            if self.rng.random() < self.weather.restart:
                box.deaf_until_ns = now_ns + self.weather.deaf_ms * MS
                self.deeds.restarts += 1
                box.restart()
        self.clock.after(500, lambda: self._beat(box))

    def breaches(self) -> list[str]:
        """Compare what the modules did with what the consoles say; each difference in words."""
        found = [f"{key} carried out {n}x" for key, n in self.deeds.carried_out.items() if n > 1]
        found += self.deeds.disobeyed
        shared = [key for key, by in self.deeds.senders.items() if len(by) > 1]
        found += [f"{key} sent by two consoles" for key in shared]
        for command, (address, message) in self.sent.items():
            key = key_of(address, message)
            endings = self.ended[command]
            if len(endings) != 1 and not (command in self.abandoned and not endings):
                found.append(f"{key} ended {len(endings)}x")
            if Ending.FINISHED in endings and key not in self.deeds.completed:
                found.append(f"{key} finished, but it was not")
            ran = self.deeds.carried_out[key] and key not in self.deeds.cut_short
            if Ending.CUT in endings and ran:
                found.append(f"{key} cut, but it ran its course")
        return found

    def false_refusals(self) -> list[Key]:
        """Commands told as refused that were carried out."""
        keys = [
            key_of(address, message)
            for command, (address, message) in self.sent.items()
            if Ending.REFUSED in self.ended[command]
        ]
        return [key for key in keys if self.deeds.carried_out[key]]

    def endings(self) -> Counter[Ending]:
        return Counter(how for endings in self.ended.values() for how in endings)
