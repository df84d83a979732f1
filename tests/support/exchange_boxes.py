"""The smallest module that can break law 1: a command memory, an allegiance, and a list of deeds.

A Box follows one of several consoles and turns its wheel under a permit only. Beside it stands an
Umpire, who hears the same words and judges by the rules in plain numbers, without allegiance.py:
whoever is followed must be whom the Umpire says.
"""

from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field

from protocol.allegiance import Allegiance
from protocol.codes import CONSOLE_ADDRESS, AnswerState, Reason, identity_bits
from protocol.command_memory import CommandMemory, Reply
from protocol.message import (
    Answer,
    Echo,
    Facts,
    Message,
    Packet,
    Permit,
    Pivot,
    Presence,
    Probe,
    Query,
    Release,
    Rest,
    RollCall,
    Telemetry,
)
from tests.support.air import MS, Clock

Key = tuple[int, int, int, int]
"""What names a command for good: address, boot, epoch, number."""


def key_of(address: int, command: Message) -> Key:
    """The key of a command to a module."""
    assert isinstance(command, Pivot | Rest)
    return (address, command.boot, command.epoch, command.number)


@dataclass
class Deeds:
    """What the modules really did, and whom they obeyed."""

    carried_out: Counter[Key] = field(default_factory=Counter)
    completed: set[Key] = field(default_factory=set)
    cut_short: set[Key] = field(default_factory=set)
    restarts: int = 0
    repeats: int = 0
    takeovers: int = 0
    lapses: int = 0
    without_permit: int = 0
    owned: int = 0
    senders: dict[Key, set[int]] = field(default_factory=dict)
    """Which consoles have sent it, by their numbers."""
    disobeyed: list[str] = field(default_factory=list)
    """Deeds for a console that was not followed, or without its permit."""


@dataclass
class Umpire:
    """The rules of "Owner" and "Drive permit" once more, in milliseconds that do not wrap."""

    boot: int
    epoch: int = 0
    console: int = 0
    grace_ms: int = 0
    expiry_ms: int | None = None
    told: tuple[int, int, int] | None = None

    def hear(self, message: Message, now_ms: int) -> None:
        if isinstance(message, RollCall):
            other = message.console != self.console
            if message.epoch <= self.epoch or (other and self.owned(now_ms)):
                return
            if other:
                self.expiry_ms = self.told = None
            self.epoch, self.console, self.grace_ms = *message, now_ms + 3_000
        elif isinstance(message, Probe | Permit | Release) and message.console == self.console:
            self._hear_own(message, now_ms)

    def _hear_own(self, message: Probe | Permit | Release, now_ms: int) -> None:
        if isinstance(message, Release):
            self.expiry_ms, self.grace_ms = None, 0
        elif isinstance(message, Permit):
            self.expiry_ms = max(self.expiry_ms or 0, message.expiry_ms)
        elif message.boot == self.boot and message.bound_ms != 0xFFFF:
            offset_ms = (message.offset_ms + 2**31) % 2**32 - 2**31
            self.told = (offset_ms, message.bound_ms, now_ms)

    def permitted(self, now_ms: int) -> bool:
        if self.told is None or self.expiry_ms is None:
            return False
        offset_ms, bound_ms, at_ms = self.told
        return now_ms < self.expiry_ms + offset_ms - bound_ms - (now_ms - at_ms) // 8192 - 1

    def owned(self, now_ms: int) -> bool:
        return now_ms < self.grace_ms or self.permitted(now_ms)


@dataclass(frozen=True)
class Parts:
    """What boxes are made of: a test of the test puts a faulty part in."""

    memory_type: type[CommandMemory] = CommandMemory
    allegiance_type: type[Allegiance] = Allegiance
    capacity: int = 8


class Box:
    """A module reduced to what the law is about. One motion at a time; a Rest cuts it."""

    def __init__(
        self,
        address: int,
        clock: Clock,
        deeds: Deeds,
        say: Callable[[Packet], None],
        made_of: Parts,
    ) -> None:
        self.address = address
        self.identity = 0xA0_0000_0000 + address * 0x101
        self._clock, self._deeds, self._speak, self._parts = clock, deeds, say, made_of
        self._boots = 0
        self.deaf_until_ns = 0
        self.restart()

    def restart(self) -> None:
        """Forget everything; come back with a boot never used."""
        self._boots += 1
        boot = (self._boots * 0x9E37_79B1 + self.address) % (1 << 32)
        parts = self._parts
        self.memory = parts.memory_type(boot, self.identity, parts.capacity)
        self.allegiance = parts.allegiance_type()
        self.umpire = Umpire(boot)
        self.running: Pivot | None = None
        self._boot_ns = self._clock.t_ns

    @property
    def now_ms(self) -> int:
        return (self._clock.t_ns - self._boot_ns) // MS

    def telemetry(self) -> Telemetry:
        bits = identity_bits(self.identity)
        return Telemetry(self.memory.boot, 0, self.now_ms, 0, 0, 1, 0, 4000, 2000, 0, bits)

    def hear(self, packet: Packet) -> None:
        message = packet.message
        if self._clock.t_ns < self.deaf_until_ns:
            return
        self.umpire.hear(message, self.now_ms)
        match message:
            case RollCall():
                self._called(message)
            case Query():
                self.say(self.memory.query(message))
            case Probe() if message.boot == self.memory.boot:
                self.allegiance.hear_probe(message, self.now_ms)
                us = (self._clock.t_ns - self._boot_ns) // 1_000
                self.say(Echo(message.boot, message.sequence, message.identity_bits, us, 0))
                self._look_at_permit()
            case Permit():
                self.allegiance.hear_permit(message, self.now_ms)
            case Release():
                self.allegiance.release(message.console)
                self._look_at_permit()
            case Pivot() | Rest():
                self._obey(message)

    def _called(self, call: RollCall) -> None:
        before = self.allegiance.console
        if self.allegiance.roll_call(*call, self.now_ms):
            self.memory.adopt(call.epoch)
            self._deeds.takeovers += before not in (0, call.console)
            self._look_at_permit()
        follows = self.allegiance
        left_ms = min(follows.owner_left_ms(self.now_ms), 0xFFFF)
        whom = (self.memory.boot, follows.epoch, follows.console)
        self.say(Presence(self.identity, *whom, 0, self.now_ms, left_ms, 0, 1))

    # -- commands ------------------------------------------------------------------------

    def _obey(self, command: Pivot | Rest) -> None:
        verdict = self.memory.judge(command, self.allegiance.owner_left_ms(self.now_ms) > 0)
        if isinstance(verdict, Reply):
            self._deeds.repeats += verdict.repeat
            self._deeds.owned += verdict.message.reason == Reason.OWNED
            self.say(verdict.message)
        elif isinstance(command, Rest):
            self._carry_out(command, 40)
            self._cut(Reason.RESTED)
        elif self.running is not None:
            self._refuse(command, Reason.BUSY)
        elif self.allegiance.permit_left_ms(self.now_ms) == 0:
            self._deeds.without_permit += 1
            self._refuse(command, Reason.NO_PERMIT)
        else:
            self.running = command
            self._carry_out(command, 60 + command.speed_rpm % 200)
            self._look_at_permit()

    def _refuse(self, command: Pivot, reason: Reason) -> None:
        self._report(self.memory.answer(command.number, AnswerState.REFUSED, reason))

    def _carry_out(self, command: Pivot | Rest, duration_ms: int) -> None:
        key = key_of(self.address, command)
        self._deeds.carried_out[key] += 1
        if (self.umpire.epoch, {self.umpire.console}) != (
            command.epoch,
            self._deeds.senders.get(key),
        ):
            self._deeds.disobeyed.append(f"{key} carried out for a console that is not followed")
        self._check_permit(command)
        number, memory = command.number, self.memory
        self._report(memory.answer(number, AnswerState.ACCEPTED, expect_ms=duration_ms))
        self._clock.after(duration_ms, lambda: self._end(command, memory))

    def _check_permit(self, command: Pivot | Rest) -> None:
        if isinstance(command, Pivot) and not self.umpire.permitted(self.now_ms):
            key = key_of(self.address, command)
            self._deeds.disobeyed.append(f"{key} drives the wheel without a permit")

    def _look_at_permit(self) -> None:
        """Cut what runs without a permit; else look again a little before it ends: the doubt
        grows until then."""
        if self.running is None:
            return
        left_ms = self.allegiance.permit_left_ms(self.now_ms)
        if left_ms == 0:
            self._deeds.lapses += 1
            self._cut(Reason.PERMIT_LAPSED)
            return
        self._check_permit(self.running)
        running = self.running
        self._clock.after(max(1, left_ms - 1), lambda: self._look_again(running))

    def _look_again(self, command: Pivot) -> None:
        if self.running is command:
            self._look_at_permit()

    def _cut(self, reason: Reason) -> None:
        if self.running is not None:
            pivot, self.running = self.running, None
            self._deeds.cut_short.add(key_of(self.address, pivot))
            self._report(self._facts(pivot, reason))

    def _end(self, command: Pivot | Rest, memory: CommandMemory) -> None:
        if memory is not self.memory:
            return  # it restarted in between
        if isinstance(command, Rest):
            self._deeds.completed.add(key_of(self.address, command))
            answer = self.memory.answer(command.number, AnswerState.FINISHED)
            self._report(answer._replace(epoch=command.epoch))
            return
        if self.running is command:
            self._look_at_permit()  # where both fall into one millisecond, the permit ends first
        if self.running is command:
            self._check_permit(command)
            self.running = None
            self._deeds.completed.add(key_of(self.address, command))
            self._report(self._facts(command, Reason.NONE))

    def _facts(self, pivot: Pivot, reason: Reason) -> Facts:
        return Facts(pivot.epoch, pivot.boot, pivot.number, reason, 1, 2, 1, 900, *[0] * 8)

    def _report(self, reply: Answer | Facts) -> None:
        self.memory.remember(reply.number, reply)
        self.say(reply)

    def say(self, message: Message) -> None:
        self._speak(Packet(CONSOLE_ADDRESS, self.address, message))
