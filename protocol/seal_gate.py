"""The gate behind the seal: which authentic frames are obeyed, at each end.

Owns what is remembered of each sender's counters, and the rules of freshness of WIRE.md's section
"Seal". One gate an end: it stands between the frame decoder and the message decoder. Time plays
no part in it.

A receiver that has restarted has forgotten which counters it has seen. Until it has proof that a
sender speaks now, it obeys only what may be repeated without harm:

    a module    Stop and RollCall, until a message that carries its present boot number
    a console   Presence, until a Presence that carries its present epoch

That frame's counter is then the window's right edge; all that is older counts as seen.

Two consoles share one address. The opening in a counter is its console's epoch, so a module keeps
its window for the epoch that it follows, and another console cannot push it along. Of another
opening it hears Stop, RollCall, and commands and queries, so that it can answer why it does not
obey: they carry that other epoch, and the command memory refuses them.
"""

from abc import ABC, abstractmethod
from collections import Counter
from typing import Any, Final

from protocol.message import (
    Command,
    Packet,
    Presence,
    Probe,
    Query,
    RollCall,
    Stop,
    TraceAsk,
    decode,
)
from protocol.replay_window import ReplayWindow
from protocol.seal import OPENING_SHIFT, KeyRing, Refused, SealFault, open_seal

_OBEYED_AGAIN: Final[frozenset[type[Any]]] = frozenset({Stop, RollCall})
"""What is obeyed however often and late it comes. An all-stop: late is better than never. A roll
call: it does nothing but ask, since only a newer epoch is adopted; and a console whose clock went
back must be answered, or it would never learn of the epoch that it has to exceed."""

_BEFORE_PROOF_AT_MODULE: Final[frozenset[type[Any]]] = frozenset({Stop, RollCall})
_BEFORE_PROOF_AT_CONSOLE: Final[frozenset[type[Any]]] = frozenset({Presence})


class _Gate(ABC):
    """What both ends share. ``faults`` counts what was refused, by reason."""

    def __init__(self, keys: KeyRing, before_proof: frozenset[type[Any]]) -> None:
        self._keys = keys
        self._before_proof = before_proof
        self._windows: dict[int, ReplayWindow] = {}
        self.faults: Counter[SealFault] = Counter()

    def admit(self, payload: bytes) -> Packet | Refused:
        """Open one checked payload and say whether it is obeyed.

        Raises RemoteProtocolError for an authentic payload that is no message of this version;
        its counter is not taken then.
        """
        opened = open_seal(self._keys, payload)
        if isinstance(opened, Refused):
            return self._refuse(opened.fault)
        packet = decode(opened.payload)
        fault = self._judge(packet, opened.source, opened.counter)
        return packet if fault is None else self._refuse(fault)

    def _judge(self, packet: Packet, source: int, counter: int) -> SealFault | None:
        window = self._windows.get(source)
        kind = type(packet.message)
        if window is None:
            if self._proves(packet):
                self._windows[source] = ReplayWindow(counter)
                return None
            return None if kind in self._before_proof else SealFault.NOT_FRESH
        too_old = window.too_old(counter)
        if window.accept(counter) or kind in _OBEYED_AGAIN:
            return None
        return SealFault.TOO_OLD if too_old else SealFault.REPEATED

    @abstractmethod
    def _proves(self, packet: Packet) -> bool:
        """Say whether this packet could only have been sent now."""

    def _refuse(self, fault: SealFault) -> Refused:
        self.faults[fault] += 1
        return Refused(fault)


class ModuleGate(_Gate):
    """A module's gate. A restart needs a new one, with the new boot number; ``follow`` tells it
    of each epoch that the module adopts, which begins anew."""

    def __init__(self, keys: KeyRing, boot: int) -> None:
        super().__init__(keys, _BEFORE_PROOF_AT_MODULE)
        self._boot = boot
        self._epoch = 0

    def follow(self, epoch: int) -> None:
        """The module follows this epoch from now on: its console must prove itself."""
        if epoch != self._epoch:
            self._epoch = epoch
            self._windows.clear()

    def _judge(self, packet: Packet, source: int, counter: int) -> SealFault | None:
        opening = counter >> OPENING_SHIFT
        if opening == self._epoch:
            return super()._judge(packet, source, counter)
        message = packet.message
        if isinstance(message, Stop | RollCall):
            return None
        stranger = isinstance(message, Command | Query) and message.epoch == opening
        return None if stranger else SealFault.OTHER_OPENING

    def _proves(self, packet: Packet) -> bool:
        message = packet.message
        return isinstance(message, Command | Query | Probe | TraceAsk) and (
            message.boot == self._boot
        )


class ConsoleGate(_Gate):
    """A console's gate. ``set_epoch`` begins anew: who spoke to the last epoch may be a replay."""

    def __init__(self, keys: KeyRing, epoch: int) -> None:
        super().__init__(keys, _BEFORE_PROOF_AT_CONSOLE)
        self._epoch = epoch

    def set_epoch(self, epoch: int) -> None:
        """Take another epoch; every module must prove itself again."""
        self._epoch = epoch
        self._windows.clear()

    def _proves(self, packet: Packet) -> bool:
        message = packet.message
        return isinstance(message, Presence) and message.epoch == self._epoch
