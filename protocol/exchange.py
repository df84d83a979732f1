"""Command exchange: the console's side of "at most once", and of "exactly one end".

Owns what becomes of each numbered command between its being given and its end: sending,
resending, asking, giving up. What happens in which phase is command_phases' table. Time is an
argument; what is to be sent comes back as Send, an end as Ended. Knows nothing of orders, the
log, links or interlocks. The caller chooses the numbers, increasing for each module; the
module's command memory does the rest.

One command is in hand for each module; others wait behind it. A Rest or a LockOut waits for
nothing and goes beside what is in hand. Since it carries a newer number, a module that has heard
it refuses whatever older command comes after it.
"""

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from protocol.codes import FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS, identity_bits
from protocol.command_lane import Entry, Lane
from protocol.command_phases import TRANSITIONS, Act, Event, Phase, event_of
from protocol.errors import LocalProtocolError
from protocol.message import (
    Answer,
    Command,
    Facts,
    LockOut,
    Message,
    Presence,
    Query,
    Rest,
    SettingWrite,
    Telemetry,
    Unlock,
)
from protocol.resend import NS_PER_MS, ResendPolicy

_DOUBTED_AFTER: Final = 6
"""Sends without an answer after which the round-trip estimate is no longer believed. Without
it, a link that has become slower than the timeout would never be measured again (Karn's rule
drops every sample) and each command would use up its tries before its answer can come. Not
fewer: where 30 % are lost each way, 6 in a row happen to 2 commands in 100, 3 to 13 in 100, and
each costs waits of the initial timeout (goodput over its bound: 0.89 with 6, 0.67 with 3)."""


AHEAD: Final = (Rest, LockOut)
"""Commands that wait for nothing: they take a danger away."""

_DONE_AT_ONCE: Final = (Rest, LockOut, Unlock, SettingWrite)
"""Commands whose first answer may be FINISHED, and so measures the round trip."""


_DEFAULT_POLICY: Final = ResendPolicy()


class Ending(StrEnum):
    """How a command ended."""

    FINISHED = "finished"
    REFUSED = "refused"
    CUT = "cut"
    UNSEEN = "unseen"


@dataclass(frozen=True, slots=True)
class Send:
    """Send this message now. ``attempt`` counts the sends for the command, queries included,
    from 1."""

    command: int
    destination: int
    message: Message
    attempt: int


@dataclass(frozen=True, slots=True)
class Ended:
    """This command has ended; nothing more will be said of it."""

    command: int
    how: Ending


Step = Send | Ended


class CommandExchange:
    """Carries commands to their ends over a link that loses, repeats, delays and reorders.

    Each method returns what is now to be sent and what has ended, in order.
    """

    def __init__(self, policy: ResendPolicy = _DEFAULT_POLICY) -> None:
        self._policy = policy
        self._lanes: dict[int, Lane] = {}
        self._active: dict[int, Lane] = {}
        """Lanes with something in hand: timers look at no others, since most modules are idle."""
        self._open: set[int] = set()

    @property
    def next_wake_ns(self) -> int | None:
        """When ``wake`` is next due, or None while no timer runs."""
        dues = (entry.due_ns for lane in self._active.values() for entry in lane.in_hand.values())
        return min(dues, default=None)

    def busy(self, destination: int) -> bool:
        """Say whether a command for this module has not ended yet."""
        lane = self._lanes.get(destination)
        return lane is not None and bool(lane.in_hand or lane.waiting)

    def awaits_answer(self, destination: int) -> bool:
        """Say whether something was sent to this module that it has not answered yet."""
        lane = self._lanes.get(destination)
        return lane is not None and any(
            entry.phase is not Phase.RUNNING for entry in lane.in_hand.values()
        )

    def submit(self, command: int, destination: int, message: Command, t_ns: int) -> list[Step]:
        """Take a command, ``command`` being its name in what comes back.

        The low 16 bits of ``destination`` are the module's address; what stands above them (the
        number of a link, say) only tells modules of one address apart.

        Raises LocalProtocolError for a destination that is not one module, for number 0, and
        for a name or a number that is still in use.
        """
        self._check(command, destination, message)
        lane = self._lane(destination)
        entry = Entry(command, destination, message)
        self._open.add(command)
        if isinstance(message, AHEAD):
            return self._happen(lane, entry, Event.TURN, t_ns)
        lane.waiting.append(entry)
        return self._next_turn(lane, t_ns)

    def receive(self, source: int, message: Message, t_ns: int) -> list[Step]:
        """Take a message that came from a module; whatever concerns no command is ignored."""
        if isinstance(message, Answer | Facts):
            lane = self._lane(source)
            steps = self._take_reply(lane, message, t_ns)
        elif isinstance(message, Presence):
            lane = self._lane(source)
            bits = identity_bits(message.identity)
            steps = self._take_boot(lane, message.boot, bits, t_ns)
        elif isinstance(message, Telemetry):
            lane = self._lane(source)
            steps = self._take_boot(lane, message.boot, message.identity_bits, t_ns)
        else:
            return []
        return steps + self._next_turn(lane, t_ns)

    def wake(self, t_ns: int) -> list[Step]:
        """Run the timers that are due at ``t_ns``, the longest overdue first."""
        due = [
            (entry.due_ns, entry.command, lane, entry)
            for lane in self._active.values()
            for entry in lane.in_hand.values()
            if entry.due_ns <= t_ns
        ]
        steps: list[Step] = []
        for _, _, lane, entry in sorted(due, key=lambda each: each[:2]):
            steps += self._happen(lane, entry, Event.DUE, t_ns)
            steps += self._next_turn(lane, t_ns)
        return steps

    def withdraw(self, destination: int) -> list[Ended]:
        """All-stop: end what was not sent to this module; never again send what was.

        A command sent but not answered is asked about from its next timer on.
        """
        lane = self._lanes.get(destination)
        if lane is None:
            return []
        steps: list[Step] = []
        for entry in lane.entries():
            steps += self._happen(lane, entry, Event.WITHDRAWN, entry.sent_ns)
        return [step for step in steps if isinstance(step, Ended)]

    def _check(self, command: int, destination: int, message: Command) -> None:
        if not FIRST_MODULE_ADDRESS <= destination & 0xFFFF <= LAST_MODULE_ADDRESS:
            raise LocalProtocolError(f"a command goes to one module, not to 0x{destination:04x}")
        if command in self._open:
            raise LocalProtocolError(f"command {command} has not ended yet")
        lane = self._lane(destination)
        taken = {entry.message.number for entry in lane.entries()}
        if message.number == 0 or message.number in taken:
            raise LocalProtocolError(f"number {message.number} is not free at 0x{destination:04x}")

    def _lane(self, address: int) -> Lane:
        lane = self._lanes.get(address)
        if lane is None:
            lane = self._lanes[address] = Lane(self._policy.estimator())
        return lane

    def _next_turn(self, lane: Lane, t_ns: int) -> list[Step]:
        if lane.in_hand or not lane.waiting:
            return []
        return self._happen(lane, lane.waiting.popleft(), Event.TURN, t_ns)

    def _take_reply(self, lane: Lane, message: Answer | Facts, t_ns: int) -> list[Step]:
        entry = lane.in_hand.get(message.number)
        if entry is None:
            return []
        sent = entry.message
        if (message.epoch, message.boot) != (sent.epoch, sent.boot):
            return []  # to a command of the same number, of another session or another boot
        expect_ms = message.expect_ms if isinstance(message, Answer) else 0
        return self._happen(lane, entry, event_of(message), t_ns, expect_ms)

    def _take_boot(self, lane: Lane, boot: int, bits: int, t_ns: int) -> list[Step]:
        steps: list[Step] = []
        for entry in lane.outlived(boot, bits):
            steps += self._happen(lane, entry, Event.RESTARTED, t_ns)
        return steps

    def _happen(
        self, lane: Lane, entry: Entry, event: Event | None, t_ns: int, expect_ms: int = 0
    ) -> list[Step]:
        """Look the event up in the table and do what stands there; nothing if nothing does."""
        act = None if event is None else TRANSITIONS.get((entry.phase, event))
        if act is None:
            return []
        if act in _ENDINGS:
            if event is Event.FINISHED and isinstance(entry.message, _DONE_AT_ONCE):
                lane.measure(entry, t_ns)
            return self._end(lane, entry, _ENDINGS[act])
        return _METHODS[act](self, lane, entry, t_ns, expect_ms)

    def _call(self, lane: Lane, entry: Entry, t_ns: int, _expect_ms: int) -> list[Step]:
        entry.phase = Phase.CALLING
        lane.in_hand[entry.message.number] = entry
        self._active[entry.destination] = lane
        return self._send(lane, entry, t_ns)

    def _ask(self, lane: Lane, entry: Entry, t_ns: int, _expect_ms: int) -> list[Step]:
        entry.phase = Phase.ASKING
        entry.tries = 0
        return self._send(lane, entry, t_ns)

    def _try_again(self, lane: Lane, entry: Entry, t_ns: int, _expect_ms: int) -> list[Step]:
        if entry.tries == min(_DOUBTED_AFTER, self._policy.tries):
            lane.round_trip.doubt()
        if entry.tries >= self._policy.tries:
            return self._end(lane, entry, Ending.UNSEEN)
        return self._send(lane, entry, t_ns)

    def _run(self, lane: Lane, entry: Entry, t_ns: int, expect_ms: int) -> list[Step]:
        lane.measure(entry, t_ns)
        if entry.phase is Phase.ASKING:
            entry.returns += 1
            if entry.returns >= self._policy.tries:
                return self._end(lane, entry, Ending.UNSEEN)
        entry.phase = Phase.RUNNING
        entry.due_ns = t_ns + expect_ms * NS_PER_MS + self._policy.finish_margin_ns
        return []

    def _refuse(self, lane: Lane, entry: Entry, t_ns: int, _expect_ms: int) -> list[Step]:
        lane.measure(entry, t_ns)
        return self._end(lane, entry, Ending.REFUSED)

    def _disown(self, lane: Lane, entry: Entry, t_ns: int, _expect_ms: int) -> list[Step]:
        if entry.sends > 1:
            return self._end(lane, entry, Ending.UNSEEN)
        return self._refuse(lane, entry, t_ns, 0)

    def _recall(self, _lane: Lane, entry: Entry, _t_ns: int, _expect_ms: int) -> list[Step]:
        entry.phase = Phase.RECALLED
        entry.tries = 0
        return []

    # What the actions share.

    def _send(self, lane: Lane, entry: Entry, t_ns: int) -> list[Step]:
        sent = entry.message
        again: Message = sent
        if entry.phase is not Phase.CALLING:
            again = Query(sent.epoch, sent.boot, sent.number)
        entry.sends += 1
        entry.tries += 1
        entry.sent_ns = t_ns
        entry.due_ns = t_ns + lane.round_trip.timeout_ns
        return [Send(entry.command, entry.destination, again, entry.sends)]

    def _end(self, lane: Lane, entry: Entry, how: Ending) -> list[Step]:
        lane.remove(entry)
        if not lane.in_hand:
            self._active.pop(entry.destination, None)
        self._open.discard(entry.command)
        return [Ended(entry.command, how)]


_METHODS: Final[dict[Act, Callable[[CommandExchange, Lane, Entry, int, int], list[Step]]]] = {
    Act.CALL: CommandExchange._call,
    Act.TRY_AGAIN: CommandExchange._try_again,
    Act.RUN: CommandExchange._run,
    Act.ASK: CommandExchange._ask,
    Act.RECALL: CommandExchange._recall,
    Act.END_REFUSED: CommandExchange._refuse,
    Act.END_REFUSED_IF_ONE_COPY: CommandExchange._disown,
}

_ENDINGS: Final[dict[Act, Ending]] = {
    Act.END_FINISHED: Ending.FINISHED,
    Act.END_CUT: Ending.CUT,
    Act.END_UNSEEN: Ending.UNSEEN,
}
