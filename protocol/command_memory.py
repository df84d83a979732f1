"""Command memory: the module's side of "at most once".

Owns what a module remembers of numbered commands: the console epoch it follows, the newest
number it has seen, and its last replies. Says of each command whether it is fresh, a repeat of
one already taken, or one to refuse by its envelope (identity, boot, epoch, number). Knows
nothing of wheels, interlocks, time or links; whoever carries commands out asks here first.

Why nothing is carried out twice: a number is fresh only if it is newer than every number seen
before, and judging it fresh makes it the newest, in one step. The replies are kept only so that
a repeat gets its answer again; losing one never makes its number fresh again.

A module makes one CommandMemory when it boots, with its new boot number, and never another. Its
epoch is 0 until it adopts one, and 0 is nobody's: no command belongs to it.
"""

from dataclasses import dataclass
from typing import Final

from protocol.codes import AnswerState, Reason, identity_bits
from protocol.errors import LocalProtocolError
from protocol.message import Answer, Command, Facts, Query

REMEMBERED_REPLIES: Final = 8
"""The fewest replies that a module must keep: one for the command in hand, and for as many that
overtake it as a person gives in a hurry. A small module has no memory for more."""

_NUMBERS: Final = 1 << 16
_HALF: Final = 1 << 15


def is_newer(number: int, than: int) -> bool:
    """Say whether a command number comes after another: RFC 1982 section 3.2, 16 bits.

    Exactly half the space apart, where the RFC leaves it undefined, neither is newer: the
    module then refuses, which is the harmless side.
    """
    return 0 < (number - than) % _NUMBERS < _HALF


def next_number(number: int) -> int:
    """Return the command number after this one; 0 is never used, so 1 follows 65535."""
    return number % (_NUMBERS - 1) + 1


@dataclass(frozen=True, slots=True)
class Fresh:
    """Never seen: carry it out, or refuse it for a reason of your own; then ``remember``."""


@dataclass(frozen=True, slots=True)
class Reply:
    """Not to be carried out; send this. ``repeat``: the number was taken before."""

    message: Answer | Facts
    repeat: bool


class CommandMemory:
    """What one module remembers of commands between one boot and the next.

    ``boot``: this boot's number, never used before by this module. ``identity``: all 64 bits.
    ``capacity``: how many replies are kept. Raises LocalProtocolError for a capacity below 1.
    """

    def __init__(self, boot: int, identity: int, capacity: int = REMEMBERED_REPLIES) -> None:
        if capacity < 1:
            raise LocalProtocolError(f"a memory for {capacity} replies remembers nothing")
        self.boot = boot
        self.epoch = 0
        self._identity_bits = identity_bits(identity)
        self._capacity = capacity
        self._newest: int | None = None
        self._replies: dict[int, Answer | Facts] = {}

    def adopt(self, epoch: int) -> bool:
        """Follow a console's epoch if it is newer, emptying the memory. Whose epoch may be
        adopted is allegiance.py's.

        Plain comparison: epochs are seconds, do not wrap within the format's life, and an equal
        one is the console that the module follows already. Returns True where adopted.
        """
        if epoch <= self.epoch:
            return False
        self.epoch = epoch
        self._newest = None
        self._replies.clear()
        return True

    def judge(self, command: Command, owned: bool = False) -> Fresh | Reply:
        """Say what to do with a command that came in. Takes the number if it is fresh.

        ``owned``: the console that is followed still owns the module, so that a command of
        another epoch is refused for that.
        """
        reason = self._envelope_fault(command)
        if owned and reason is Reason.OTHER_EPOCH:
            reason = Reason.OWNED
        if reason is not Reason.NONE:
            return Reply(_about(command, AnswerState.REFUSED, reason), repeat=False)
        remembered = self._replies.get(command.number)
        if remembered is not None:
            return Reply(remembered, repeat=True)
        if self._has_passed(command.number):
            refusal = _about(command, AnswerState.REFUSED, Reason.NUMBER_PASSED)
            return Reply(refusal, repeat=False)
        self._take(command.number)
        return Fresh()

    def remember(self, number: int, reply: Answer | Facts) -> None:
        """Keep the reply to a number, in place of an earlier one to the same.

        A reply that is not of this boot and epoch, or whose number was never taken, is not
        kept: a motion may outlast the epoch in which it was ordered, and its facts must not
        pass for the reply to another console's command of the same number.
        Raises LocalProtocolError where the reply names another number.
        """
        if reply.number != number:
            raise LocalProtocolError(f"reply to {reply.number} offered as one to {number}")
        if (reply.epoch, reply.boot) != (self.epoch, self.boot) or not self._has_passed(number):
            return
        self._replies[number] = reply
        if len(self._replies) > self._capacity:
            del self._replies[next(iter(self._replies))]

    def query(self, query: Query) -> Answer | Facts:
        """Return the remembered reply again, or an Answer UNKNOWN.

        Nothing is carried out. But a number asked about is passed from then on, so that UNKNOWN
        is final: the command was not taken before (as far as the memory goes), and a copy of it
        that is still on its way will be refused.
        """
        if query.boot != self.boot:
            return _about(query, AnswerState.UNKNOWN, Reason.OTHER_BOOT)
        if query.epoch != self.epoch or not self.epoch:
            return _about(query, AnswerState.UNKNOWN, Reason.OTHER_EPOCH)
        remembered = self._replies.get(query.number)
        if remembered is not None:
            return remembered
        if query.number and not self._has_passed(query.number):
            self._take(query.number)
        return _about(query, AnswerState.UNKNOWN, Reason.NONE)

    def answer(
        self, number: int, state: AnswerState, reason: Reason = Reason.NONE, expect_ms: int = 0
    ) -> Answer:
        """Make an Answer to a command of this epoch and boot. ``expect_ms``: milliseconds
        until it should be finished."""
        return Answer(self.epoch, self.boot, number, state, reason, expect_ms)

    def _envelope_fault(self, command: Command) -> Reason:
        """Find what is wrong with a command's envelope, most telling first; NONE if nothing."""
        faults = (
            (command.identity_bits != self._identity_bits, Reason.OTHER_IDENTITY),
            (command.boot != self.boot, Reason.OTHER_BOOT),
            (command.epoch != self.epoch or not self.epoch, Reason.OTHER_EPOCH),
            (command.number == 0, Reason.BAD_FIELD),
        )
        return next((reason for wrong, reason in faults if wrong), Reason.NONE)

    def _has_passed(self, number: int) -> bool:
        """Say whether the number can no longer be fresh."""
        return self._newest is not None and not is_newer(number, self._newest)

    def _take(self, number: int) -> None:
        """Make the number the newest; drop replies that it leaves more than half behind.

        Those would otherwise meet their own number again after a wrap, and answer for a command
        that was never carried out.
        """
        self._newest = number
        for old in [each for each in self._replies if not is_newer(number, each)]:
            del self._replies[old]


def _about(sent: Command | Query, state: AnswerState, reason: Reason) -> Answer:
    """Answer in the words of the command or query itself, so that its sender can match it."""
    return Answer(sent.epoch, sent.boot, sent.number, state, reason, 0)
