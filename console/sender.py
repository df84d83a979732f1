"""From messages to frames that wait for their wire: addressing, sealing, queues of each link.

Owns the outboxes of a session and which links are open. Knows no fleet and no commands; what is
recorded of what is sent is core.py's.
"""

from collections.abc import Iterator, Sequence

from console.link import Outbox
from console.sealing import ConsoleSeal
from console.upkeep import Saying
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.frame import frame
from protocol.message import Message, Packet, Query, encode


class Sender:
    """Queues frames for ``outboxes``, one a link. ``seal`` None: frames are not sealed."""

    def __init__(self, outboxes: Sequence[Outbox], seal: ConsoleSeal | None) -> None:
        self._outboxes = list(outboxes)
        self._seal = seal
        self.open_links = set(range(len(self._outboxes)))

    def push(self, link: int, address: int, message: Message, urgent: bool = False) -> None:
        """Queue a message for one address; an urgent one goes before all that are not."""
        payload = encode(Packet(address, CONSOLE_ADDRESS, message))
        if self._seal is not None:
            payload = self._seal.seal(payload)
        self._outboxes[link].push(address, frame(payload), urgent)

    def broadcast(self, message: Message, urgent: bool = False) -> None:
        """Queue a message for everyone, on each open link."""
        for link in sorted(self.open_links):
            self.push(link, EVERYONE_ADDRESS, message, urgent)

    def say(self, sayings: Sequence[Saying]) -> None:
        """Queue what the schedules have due, where the link is still open."""
        for saying in sayings:
            if saying.link in self.open_links:
                self.push(*saying)

    def prove(self, link: int, address: int, query: Query, urgent: bool = False) -> None:
        """Show a sealed module that its boot number is known, by a question about no command.
        What it obeys before that is little (WIRE.md, "After a restart")."""
        if self._seal is not None:
            self.push(link, address, query, urgent)

    def drop_plain(self, link: int | None = None, address: int | None = None) -> None:
        """Forget what is not urgent, everywhere or on one link for one address."""
        for outbox in self._outboxes if link is None else (self._outboxes[link],):
            outbox.drop_plain(address)

    def next_ready_ns(self, t_ns: int) -> list[int | None]:
        """When each open link may take its next frame; None where nothing waits."""
        return [self._outboxes[link].next_ready_ns(t_ns) for link in self.open_links]

    def ready(self, t_ns: int) -> Iterator[tuple[int, bytes]]:
        """Frames that the wires have room for now, link by link."""
        for link in sorted(self.open_links):
            while (data := self._outboxes[link].pop_ready(t_ns)) is not None:
                yield link, data
