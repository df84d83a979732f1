"""One virtual module on a bench, without radio: what is said to it and what it says."""

from protocol.message import Message, Packet, Presence, RollCall
from sim_link.module import VirtualModule
from sim_link.tally import TallyEntry
from tests.support.virtual_console import (
    CONSOLE,
    EPOCH,
    MS,
    S,
    permit,
    spec_of,
    to_all,
    to_module,
    told,
)


class Bench:
    """The module, its permit renewed while time passes, unless ``permits`` is False."""

    def __init__(self, seed: int = 7, **spec: object) -> None:
        self.tally: list[TallyEntry] = []
        made = spec_of(**spec)  # type: ignore[arg-type]
        self.module = VirtualModule(made, seed, self.tally.append, drift_ppm=0.0)
        self.t_ns = 0
        self.heard: list[Packet] = []
        self.permits = True
        self.permit_ns = 20 * S
        self.me = self.roll()

    def roll(self) -> Presence:
        """Call the roll, and give a permit."""
        said = self.say(to_all(RollCall(EPOCH, CONSOLE)))
        me = next(m for m in said if isinstance(m, Presence))
        self.permit(me)
        return me

    def permit(self, me: Presence) -> None:
        """Tell the module its clock, and let it drive for a while; its Echo is not noted."""
        offset_ms = me.time_ms - self.t_ns // MS
        self.module.receive(to_module(told(me, offset_ms)), self.t_ns)
        self.module.receive(to_all(permit(self.t_ns)), self.t_ns)

    def say(self, packet: Packet) -> list[Message]:
        return self._note(self.module.receive(packet, self.t_ns))

    def order(self, message: Message) -> list[Message]:
        return self.say(to_module(message))

    def run(self, duration_ns: int = 20 * S) -> list[Message]:
        """Let time pass, waking the module exactly when it wants to be woken."""
        end_ns = self.t_ns + duration_ns
        said: list[Message] = []
        while self.module.next_wake_ns <= end_ns:
            if self.permits and self.module.next_wake_ns > self.permit_ns:
                self.permit_ns = self.module.next_wake_ns + 20 * S
                said += self._note(self.module.receive(to_all(permit(self.t_ns)), self.t_ns))
            self.t_ns = self.module.next_wake_ns
            said += self._note(self.module.wake(self.t_ns))
        self.t_ns = end_ns
        return said

    def _note(self, packets: list[Packet]) -> list[Message]:
        self.heard += packets
        return [packet.message for packet in packets]


def of(kind: type, said: list[Message]) -> list[Message]:
    return [message for message in said if isinstance(message, kind)]
