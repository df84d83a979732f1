"""The console's end of the seal, for one session: what goes out sealed, what comes in judged.

Owns the sealer, the gate, and one frame decoder a link beside the reducer's: the gate's verdict
is a record before the bytes are (law 7), and a replay, which has no key, drops what was dropped.
Must not know files or fleets.
"""

from collections.abc import Callable
from typing import Final

from protocol.errors import RemoteProtocolError
from protocol.frame import Dropped, FrameDecoder
from protocol.seal import KeyRing, Refused, Sealer
from protocol.seal_gate import ConsoleGate

_NO_MESSAGE: Final = "unknown message"


class ConsoleSeal:
    """``remember(epoch)`` must have stored the epoch durably when it returns: it is the opening
    of this console's counters, and no later session may use it again."""

    def __init__(self, keys: KeyRing, epoch: int, remember: Callable[[int], None]) -> None:
        self._keys = keys
        self._remember = remember
        self._decoders: dict[int, FrameDecoder] = {}
        remember(epoch)
        self._sealer = Sealer(keys, epoch)
        self._gate = ConsoleGate(keys, epoch)

    def set_epoch(self, epoch: int) -> None:
        """Go on under another epoch."""
        self._remember(epoch)
        self._sealer = Sealer(self._keys, epoch)
        self._gate.set_epoch(epoch)

    def seal(self, payload: bytes) -> bytes:
        """Seal what is sent."""
        return self._sealer.seal(payload)

    def judge(self, link: int, data: bytes) -> tuple[tuple[int, ...], tuple[str, ...]]:
        """Say which of the pieces that these bytes complete are not obeyed, and why.

        Pieces are counted as the frame decoder gives them; what it dropped by itself is not
        named again.
        """
        decoder = self._decoders.setdefault(link, FrameDecoder())
        refused = {}
        for count, piece in enumerate(decoder.feed(data)):
            if not isinstance(piece, Dropped) and (fault := self._fault(piece)):
                refused[count] = fault
        return tuple(refused), tuple(refused.values())

    def _fault(self, piece: bytes) -> str:
        try:
            verdict = self._gate.admit(piece)
        except RemoteProtocolError:
            return _NO_MESSAGE
        return verdict.fault.value if isinstance(verdict, Refused) else ""
