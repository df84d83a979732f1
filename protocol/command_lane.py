"""What the console keeps of one module's commands: which are in hand, which wait, which boot.

Owns one module's lane: its commands in hand by number, those waiting behind, the round-trip
estimate, and which boot number is the newest. Decides nothing: exchange.py does, by the table
in command_phases.py.
"""

from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass, field

from protocol.command_phases import Phase
from protocol.message import Command
from protocol.rto import RoundTripEstimator


@dataclass(slots=True, eq=False)
class Entry:
    """One command that has not ended.

    ``sends`` counts all sends for it, ``tries`` those of the present phase, ``returns`` how
    often it was found still running when asked about. Times are monotonic nanoseconds.
    """

    command: int
    destination: int
    message: Command
    phase: Phase = Phase.WAITING
    sends: int = 0
    tries: int = 0
    returns: int = 0
    sent_ns: int = 0
    due_ns: int = 0


@dataclass(slots=True, eq=False)
class Lane:
    """One module as seen by the exchange. ``in_hand`` is keyed by command number."""

    round_trip: RoundTripEstimator
    in_hand: dict[int, Entry] = field(default_factory=dict)
    waiting: deque[Entry] = field(default_factory=deque)
    boots_heard: set[int] = field(default_factory=set)
    newest_boot: int | None = None

    def entries(self) -> list[Entry]:
        """All commands not ended, those in hand first; a copy, safe to end entries under."""
        return [*self.in_hand.values(), *self.waiting]

    def remove(self, entry: Entry) -> None:
        """Take an entry out, wherever it is."""
        if entry.phase is Phase.WAITING:
            self.waiting.remove(entry)
        else:
            del self.in_hand[entry.message.number]

    def measure(self, entry: Entry, t_ns: int) -> None:
        """Karn's rule: a reply measures the round trip only where one copy was sent.

        And only the first reply to the command itself: what comes after it is sent when a
        motion ends, not when a question arrives.
        """
        if entry.phase is Phase.CALLING and entry.sends == 1:
            self.round_trip.sample(max(0, t_ns - entry.sent_ns))

    def outlived(self, boot: int, identity_bits: int) -> Iterator[Entry]:
        """Hear a boot number; give the commands that were meant for an earlier boot.

        A boot number never heard is the newest, since none repeats; an older one heard again
        was delayed on its way and says nothing. Other identity bits are another box with the
        same address: its boots do not concern this module's commands.
        """
        if boot not in self.boots_heard:
            self.boots_heard.add(boot)
            self.newest_boot = boot
        if boot == self.newest_boot:
            for entry in self.entries():
                sent = entry.message
                if sent.boot != boot and sent.identity_bits == identity_bits:
                    yield entry
