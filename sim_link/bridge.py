"""The bridge between the serial line and the air: what it passes on, keeps waiting, and loses.

Owns the bridge's own state: half frames, counts, queue limits, restarts, silence, the pulled cable.
Knows no paths and no modules: frames in from the line, frames to be put on the air out; where they
go is world.py's. Times are nanoseconds of fleet time.

A filtering bridge checks frames and answers questions about itself. A transparent one is a modem:
it passes on whatever lies between two zero bytes, and adds nothing. Its queue to the air is a plain
one, the newest dropped where it is full: it knows no priorities, so that a console which hands over
more than the air carries makes its own all-stop wait.
"""

import re
from dataclasses import dataclass
from typing import Final, NamedTuple

from protocol.codes import BRIDGE_ADDRESS, CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.frame import Dropped, FrameDecoder, frame
from protocol.message import HEADER, BridgeAsk, BridgeStatus, Packet, encode
from sim_link.options import BridgeKind
from sim_link.reading import understood

QUEUE_FRAMES: Final = 64
"""Frames that may wait for the air; small radios have memory for some tens."""
LINE_BYTES: Final = 16_384
"""Bytes that may wait for the line to the console."""
BOUNDLESS_LINE_BYTES: Final = 1 << 20
"""The same where frames take no time on the air: then a thousand modules answer a roll call in one
instant, which no real air could bring, and no small memory could hold."""
BOOT_NS: Final = 400_000_000
"""A bridge that starts anew hears nothing for so long."""
MOST_BYTES: Final = 64
"""A modem cuts what is longer than its packet buffer."""

_SIGNAL_dBm: Final = -62
_NOISE_dBm: Final = -97
"""What a receiver in the invented hall would show; this radio's losses do not hang on them."""
_U16: Final = 0xFFFF
_U32: Final = 0xFFFF_FFFF
_PIECES: Final = re.compile(rb"[^\0]*\0|[^\0]{%d}" % MOST_BYTES)


@dataclass(slots=True)
class _Counts:
    """What a bridge has counted since it started."""

    from_console: int = 0
    to_console: int = 0
    dropped: int = 0
    queue_most: int = 0


class Outgoing(NamedTuple):
    """A frame for the air, and the address that it is for."""

    address: int
    data: bytes


class Bridge:
    """One bridge in time. ``sealed``: it holds no key, so that it answers nothing;
    ``line_bytes``: how many bytes may wait for the line."""

    def __init__(self, kind: BridgeKind, *, sealed: bool, line_bytes: int = LINE_BYTES) -> None:
        self.kind = kind
        self._line_bytes = line_bytes
        self._answers = kind is BridgeKind.FILTERING and not sealed
        self._since_ns = self._hears_ns = 0
        self._counts = _Counts()
        self._decoder = FrameDecoder()
        self._tail = b""
        self._silent = False
        self.unplugged = False
        """Whether its cable is pulled."""
        self.dropped = 0
        """Frames dropped in all its lives: that failed their check, or found a queue full."""

    @property
    def transparent(self) -> bool:
        """Whether it is a mere modem."""
        return self.kind is BridgeKind.TRANSPARENT

    def deaf(self, t_ns: int) -> bool:
        """Whether it passes nothing on at ``t_ns``: unplugged, silent, or starting."""
        return self.unplugged or self._silent or t_ns < self._hears_ns

    def reset(self, t_ns: int) -> None:
        """Start anew: half a frame and all counts are lost, and it is deaf for a while."""
        self._since_ns, self._hears_ns = t_ns, t_ns + BOOT_NS
        self._counts = _Counts()
        self._decoder, self._tail = FrameDecoder(), b""

    def silence(self, silent: bool) -> None:
        """Pass nothing on and say nothing, either way, or everything again."""
        self._silent = silent

    def from_line(self, data: bytes) -> list[Outgoing]:
        """Take bytes off the line; return what is to go on the air."""
        if self.transparent:
            return [Outgoing(EVERYONE_ADDRESS, piece) for piece in self._pieces(data)]
        frames = []
        for found in self._decoder.feed(data):
            if isinstance(found, Dropped) or len(found) < HEADER.size:
                self.dropped += 1
                self._counts.dropped += 1
            else:
                self._counts.from_console += 1
                frames.append(Outgoing(HEADER.unpack_from(found)[2], frame(found)))
        return frames

    def _pieces(self, data: bytes) -> list[bytes]:
        data = self._tail + data
        pieces = _PIECES.findall(data)
        self._tail = data[sum(map(len, pieces)) :]
        return pieces

    def takes(self, waiting: int) -> bool:
        """Whether there is room for one more frame where so many wait; counts it if not."""
        if waiting < QUEUE_FRAMES:
            return True
        self.dropped += 1
        self._counts.dropped += 1
        return False

    def note_waiting(self, waiting: int) -> None:
        """Keep the greatest number of frames that waited."""
        self._counts.queue_most = max(self._counts.queue_most, waiting)

    def to_line(self, waiting_bytes: int) -> bool:
        """Whether a frame heard goes on to the console, where so many bytes wait; counts it."""
        if waiting_bytes >= self._line_bytes:
            self.dropped += 1
            self._counts.dropped += 1
            return False
        self._counts.to_console += 1
        return True

    def answer(self, address: int, frame_bytes: bytes, waiting: int, t_ns: int) -> bytes | None:
        """What it says of itself, if this frame asks."""
        if not self._answers or address != BRIDGE_ADDRESS:
            return None
        packet = understood(frame_bytes)
        if packet is None or not isinstance(packet.message, BridgeAsk):
            return None
        status = self._status(packet.message, waiting, t_ns)
        return frame(encode(Packet(CONSOLE_ADDRESS, BRIDGE_ADDRESS, status)))

    def _status(self, ask: BridgeAsk, waiting: int, t_ns: int) -> BridgeStatus:
        counts = self._counts
        return BridgeStatus(
            sequence=ask.sequence,
            uptime_ms=(t_ns - self._since_ns) // 1_000_000 & _U32,
            frames_from_console=counts.from_console & _U32,
            frames_to_console=counts.to_console & _U32,
            dropped=counts.dropped & _U32,
            queue=min(waiting, _U16),
            queue_most=min(counts.queue_most, _U16),
            signal_dBm=_SIGNAL_dBm,
            noise_dBm=_NOISE_dBm,
        )
