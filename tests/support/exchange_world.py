"""One console, three modules, and an air that does its worst: where law 1 is searched for
exceptions.

Everything runs in virtual time on one thread, in real frames of bytes, from seeds. The modules
here are the smallest that can break the law: a CommandMemory and a list of what was done.
"""

import random
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from heapq import heappop, heappush

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS, AnswerState, Reason, identity_bits
from protocol.command_memory import CommandMemory, Reply, next_number
from protocol.exchange import CommandExchange, Ended, Ending, ResendPolicy, Send
from protocol.frame import FrameDecoder, frame
from protocol.message import (
    Answer,
    Command,
    Facts,
    Message,
    Packet,
    Pivot,
    Presence,
    Query,
    Rest,
    RollCall,
    Telemetry,
    decode,
    encode,
)

MS = 1_000_000
ADDRESSES = (0x10, 0x11, 0x12)


@dataclass(frozen=True)
class Weather:
    """How bad the air is. Parts are probabilities for each frame and direction."""

    loss: float = 0.2
    repeat: float = 0.1
    damage: float = 0.05
    delay_ms: int = 10
    spread_ms: int = 60
    late: float = 0.02
    late_ms: int = 150
    restart: float = 0.02
    deaf_ms: int = 400
    capacity: int = 16


class Clock:
    """Virtual time: a heap of what is still to happen."""

    def __init__(self) -> None:
        self.t_ns = 0
        self._heap: list[tuple[int, int, Callable[[], None]]] = []
        self._count = 0

    def at(self, t_ns: int, act: Callable[[], None]) -> None:
        self._count += 1
        heappush(self._heap, (t_ns, self._count, act))

    def run(self, until: Callable[[], bool]) -> None:
        while self._heap and not until():
            self.t_ns, _, act = heappop(self._heap)
            act()

    def drain(self, t_ns: int) -> None:
        while self._heap and self._heap[0][0] <= t_ns:
            self.t_ns, _, act = heappop(self._heap)
            act()


class Air:
    """One direction of one module's radio: loses, repeats, delays, reorders and damages."""

    def __init__(
        self, clock: Clock, rng: random.Random, weather: Weather, heard: Callable[[Packet], None]
    ) -> None:
        self._clock, self._rng, self._weather, self._heard = clock, rng, weather, heard
        self._decoder = FrameDecoder()

    def carry(self, packet: Packet) -> None:
        weather, rng = self._weather, self._rng
        data = frame(encode(packet))
        for _ in range(2 if rng.random() < weather.repeat else 1):
            if rng.random() < weather.loss:
                continue
            copy = bytearray(data)
            if rng.random() < weather.damage:
                copy[rng.randrange(len(copy))] ^= rng.randrange(1, 256)
            delay_ms = weather.delay_ms + weather.spread_ms * rng.random()
            if rng.random() < weather.late:
                delay_ms += weather.late_ms * rng.random()
            arrives_ns = self._clock.t_ns + int(delay_ms * MS)
            self._clock.at(arrives_ns, lambda copy=bytes(copy): self._arrive(copy))  # type: ignore[misc]

    def _arrive(self, data: bytes) -> None:
        for piece in self._decoder.feed(data):
            if isinstance(piece, bytes):
                self._heard(decode(piece))


Key = tuple[int, int, int, int]
"""What names a command for good: address, epoch, boot, number."""


@dataclass
class Deeds:
    """What the modules really did."""

    carried_out: Counter[Key] = field(default_factory=Counter)
    completed: set[Key] = field(default_factory=set)
    cut_short: set[Key] = field(default_factory=set)
    restarts: int = 0
    repeats: int = 0


class Box:
    """A module reduced to what the law is about. One motion at a time; a Rest cuts it."""

    def __init__(
        self, address: int, world: "World", memory_type: type[CommandMemory], capacity: int
    ) -> None:
        self.address, self.world = address, world
        self.identity = 0xA0_0000_0000 + address * 0x101
        self._memory_type, self._capacity = memory_type, capacity
        self._boots = 0
        self.deaf_until_ns = 0
        self.restart()

    def restart(self) -> None:
        """Forget everything; hear nothing for a while; come back with a boot never used."""
        self._boots += 1
        boot = (self._boots * 0x9E37_79B1 + self.address) % (1 << 32)
        self.memory = self._memory_type(boot, self.identity, self._capacity)
        self.running: Pivot | None = None

    def telemetry(self) -> Telemetry:
        bits = identity_bits(self.identity)
        return Telemetry(self.memory.boot, 0, 0, 0, 0, 1, 0, 4000, 2000, 0, bits)

    def hear(self, packet: Packet) -> None:
        message = packet.message
        if self.world.clock.t_ns < self.deaf_until_ns:
            return
        if isinstance(message, RollCall):
            self.memory.roll_call(message.epoch)
            presence = Presence(self.identity, self.memory.boot, self.memory.epoch, 0, 0, 1, 0)
            self._say(presence)
        elif isinstance(message, Query):
            self._say(self.memory.query(message))
        elif isinstance(message, Pivot | Rest):
            self._obey(message)

    def _obey(self, command: Pivot | Rest) -> None:
        verdict = self.memory.judge(command)
        if isinstance(verdict, Reply):
            self.world.deeds.repeats += verdict.repeat
            self._say(verdict.message)
        elif isinstance(command, Rest):
            self._carry_out(command, 40)
            if self.running is not None:
                pivot, self.running = self.running, None
                self.world.deeds.cut_short.add(self._key(pivot))
                self._report(self._facts(pivot, Reason.RESTED))
        elif self.running is not None:
            number = command.number
            self._report(self.memory.answer(number, AnswerState.REFUSED, Reason.BUSY))
        else:
            self.running = command
            self._carry_out(command, 60 + command.speed_rpm % 200)

    def _carry_out(self, command: Pivot | Rest, duration_ms: int) -> None:
        self.world.deeds.carried_out[self._key(command)] += 1
        number = command.number
        self._report(self.memory.answer(number, AnswerState.ACCEPTED, expect_ms=duration_ms))
        memory = self.memory
        end_ns = self.world.clock.t_ns + duration_ms * MS
        self.world.clock.at(end_ns, lambda: self._end(command, memory))

    def _end(self, command: Pivot | Rest, memory: CommandMemory) -> None:
        if memory is not self.memory:
            return  # it restarted in between
        if isinstance(command, Rest):
            self.world.deeds.completed.add(self._key(command))
            answer = self.memory.answer(command.number, AnswerState.FINISHED)
            self._report(answer._replace(epoch=command.epoch))
        elif self.running is command:
            self.running = None
            self.world.deeds.completed.add(self._key(command))
            self._report(self._facts(command, Reason.NONE))

    def _facts(self, pivot: Pivot, reason: Reason) -> Facts:
        return Facts(pivot.epoch, pivot.boot, pivot.number, reason, 1, 2, 1, 900, *[0] * 7)

    def _key(self, command: Pivot | Rest) -> Key:
        return (self.address, command.epoch, command.boot, command.number)

    def _report(self, reply: Answer | Facts) -> None:
        self.memory.remember(reply.number, reply)
        self._say(reply)

    def _say(self, message: Message) -> None:
        self.world.up[self.address].carry(Packet(CONSOLE_ADDRESS, self.address, message))


class World:
    """One console and three boxes, from one seed."""

    def __init__(
        self, seed: int, weather: Weather, memory_type: type[CommandMemory] = CommandMemory
    ) -> None:
        self.rng = random.Random(seed)
        self.weather = weather
        self.clock = Clock()
        self.deeds = Deeds()
        self.exchange = CommandExchange(ResendPolicy())
        self.epoch = 1000
        self.boots: dict[int, int] = {}
        self.numbers = dict.fromkeys(ADDRESSES, 65_500)
        self.sent: dict[int, tuple[int, Command]] = {}
        self.ended: dict[int, list[Ending]] = {}
        self.pausing = False
        self.wake_ns = -1
        make = (self.clock, self.rng, weather)
        self.down = {a: Air(*make, lambda p, a=a: self.boxes[a].hear(p)) for a in ADDRESSES}  # type: ignore[misc]
        self.up = {a: Air(*make, self._console_hears) for a in ADDRESSES}
        self.boxes = {a: Box(a, self, memory_type, weather.capacity) for a in ADDRESSES}

    def run(self, commands: int) -> "World":
        for address in ADDRESSES:
            self._beat(self.boxes[address])
            self.clock.at(self.rng.randrange(100) * MS, lambda a=address: self._order(a, commands))  # type: ignore[misc]
        self.clock.run(until=lambda: len(self.sent) >= commands and not self._busy())
        # Whatever is still in the air arrives after the last end has been told.
        self.clock.drain(self.clock.t_ns + 5_000 * MS)
        return self

    def _busy(self) -> bool:
        return any(self.exchange.busy(address) for address in ADDRESSES)

    def _beat(self, box: Box) -> None:
        now_ns = self.clock.t_ns
        if now_ns >= box.deaf_until_ns:
            box._say(box.telemetry())
            if self.rng.random() < self.weather.restart:
                box.deaf_until_ns = now_ns + self.weather.deaf_ms * MS
                self.deeds.restarts += 1
                box.restart()
        self.clock.at(now_ns + 500 * MS, lambda: self._beat(box))

    def _order(self, address: int, commands: int) -> None:
        """Give the next command; now and then withdraw, or change the epoch once all is quiet."""
        if len(self.sent) >= commands:
            return
        if self.rng.random() < 0.01:
            self.pausing = True
        if self.pausing and not self._busy():
            self.pausing = False
            self.epoch += 1
            self.boots.clear()
            self._call_roll()
        pause_ms = self.rng.choice((5, 50, 200, 400))
        if address in self.boots and not self.pausing:
            self._submit(address)
            if self.rng.random() < 0.03:
                self._take(self.exchange.withdraw(address))
                pause_ms = 4000  # as after an all-stop: what is still in the air comes first
        self.clock.at(self.clock.t_ns + pause_ms * MS, lambda: self._order(address, commands))

    def _submit(self, address: int) -> None:
        self.numbers[address] = number = next_number(self.numbers[address])
        envelope = (self.epoch, self.boots[address], number)
        bits = identity_bits(self.boxes[address].identity)
        message: Command = Pivot(*envelope, bits, 1, 1, self.rng.randrange(9000))
        if self.rng.random() < 0.15:
            message = Rest(*envelope, bits)
        command = len(self.sent)
        self.sent[command] = (address, message)
        self.ended[command] = []
        self._take(self.exchange.submit(command, address, message, self.clock.t_ns))

    def _call_roll(self) -> None:
        for address in ADDRESSES:
            call = RollCall(self.epoch)
            self.down[address].carry(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, call))

    def _console_hears(self, packet: Packet) -> None:
        message = packet.message
        if isinstance(message, Presence) and message.epoch == self.epoch:
            self.boots[packet.source] = message.boot
        if isinstance(message, Telemetry) and message.boot != self.boots.get(packet.source):
            self._call_roll()
        self._take(self.exchange.receive(packet.source, message, self.clock.t_ns))

    def _wake(self) -> None:
        self._take(self.exchange.wake(self.clock.t_ns))

    def _take(self, steps: "list[Send | Ended] | list[Ended]") -> None:
        for step in steps:
            if isinstance(step, Ended):
                self.ended[step.command].append(step.how)
            else:
                packet = Packet(step.destination, CONSOLE_ADDRESS, step.message)
                self.down[step.destination].carry(packet)
        wake_ns = self.exchange.next_wake_ns
        if wake_ns is not None and wake_ns != self.wake_ns:
            self.wake_ns = wake_ns
            self.clock.at(max(wake_ns, self.clock.t_ns), self._wake)

    def breaches(self) -> list[str]:
        """Compare what the modules did with what the console says; each difference in words."""
        found = [f"{key} carried out {n}x" for key, n in self.deeds.carried_out.items() if n > 1]
        for command, (address, message) in self.sent.items():
            key = (address, message.epoch, message.boot, message.number)
            endings = self.ended[command]
            if len(endings) != 1:
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
            (address, message.epoch, message.boot, message.number)
            for command, (address, message) in self.sent.items()
            if Ending.REFUSED in self.ended[command]
        ]
        return [key for key in keys if self.deeds.carried_out[key]]

    def endings(self) -> Counter[Ending]:
        return Counter(how for endings in self.ended.values() for how in endings)


FAIR = Weather()
FOUL = Weather(loss=0.4, repeat=0.2, damage=0.1)
CLEAR_SKY = Weather(loss=0, repeat=0, damage=0, late=0, restart=0)
SLOW = Weather(loss=0.1, repeat=0.3, late=0.3, late_ms=3000, restart=0.1, deaf_ms=20, capacity=2)
"""Copies arrive seconds late, long after a restart or after a small memory has moved on. With
copies later than a restart takes, no console can know of a refusal that nothing came before."""
