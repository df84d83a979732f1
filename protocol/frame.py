"""Framing: from payloads to delimited frames, and from any stream of bytes back to payloads.

Owns the check (CRC-32C), the byte stuffing (COBS: Cheshire and Baker, IEEE/ACM Transactions
on Networking 7:159-172, 1999) and the delimiter, a zero byte. Knows nothing of what a payload
means (message.py), of time, or of where the bytes come from.

On the wire: COBS(payload + CRC-32C of the payload, little-endian) + one zero byte. Stuffed
bytes are never zero, so a zero byte always ends a frame: a decoder may join in mid-stream, and
after any damage it is in step again at the next zero byte.
"""

from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from cobs import cobs
from crcmod.predefined import mkCrcFun

from protocol.errors import LocalProtocolError

CHECK_BYTES: Final = 4
MAX_FRAME_BYTES: Final = 62
"""Payload and check, before stuffing. With one byte of stuffing and the delimiter: 64."""
MAX_PAYLOAD_BYTES: Final = MAX_FRAME_BYTES - CHECK_BYTES
MAX_STUFFED_BYTES: Final = MAX_FRAME_BYTES + 1
"""COBS adds exactly one byte to anything up to 253 bytes (the 1999 paper, section III)."""

_DELIMITER: Final = b"\0"
_RAW_BYTES: Final = MAX_STUFFED_BYTES + 1

_crc32c = mkCrcFun("crc-32c")

_GOOD_RESIDUE: Final = 0x48674BC7
"""CRC-32C over any payload followed by its own CRC, little-endian. One pass over the whole
frame and one comparison: cutting the check off first costs a slice and an int more."""


class Drop(StrEnum):
    """Why a piece between two delimiters gave no payload."""

    DAMAGED = "check failed"
    STUFFING = "bad stuffing"
    TOO_LONG = "too long"
    TOO_SHORT = "too short"


@dataclass(frozen=True, slots=True)
class Dropped:
    """A piece that was no good frame. ``raw``: its bytes as received, without the delimiter,
    cut to 64."""

    reason: Drop
    raw: bytes


def frame(payload: bytes) -> bytes:
    """Make the frame of a payload of 1 to 58 bytes, ready for the wire, delimiter included.

    Raises LocalProtocolError where the payload is empty or too long.
    """
    if not 0 < len(payload) <= MAX_PAYLOAD_BYTES:
        raise LocalProtocolError(
            f"a payload has 1 to {MAX_PAYLOAD_BYTES} bytes, this one {len(payload)}"
        )
    check = _crc32c(payload).to_bytes(CHECK_BYTES, "little")
    return bytes(cobs.encode(payload + check)) + _DELIMITER


class FrameDecoder:
    """Takes a stream in chunks of any size; gives checked payloads, and what was dropped.

    Holds at most 64 bytes between two calls, whatever comes in. Two delimiters in a row are
    no frame and no damage: a sender may put one in front to end whatever came before.

    ``frames`` and ``dropped`` count over the decoder's whole life; ``reset`` leaves them.
    """

    __slots__ = ("_held", "dropped", "frames")

    def __init__(self) -> None:
        self.frames = 0
        self.dropped = 0
        self._held = b""

    def feed(self, data: bytes) -> list[bytes | Dropped]:
        """Take the next bytes; return what they completed, in order.

        The first piece of a stream may be the tail of a frame; it is then reported as dropped.
        A piece that is too long is reported when its delimiter comes, and its length is not
        kept: only its first 64 bytes are.
        """
        pieces = data.split(_DELIMITER)
        if self._held:
            pieces[0] = self._held + pieces[0]
        self._held = pieces.pop()[:_RAW_BYTES]
        found: list[bytes | Dropped] = []
        dropped_before = self.dropped
        for piece in pieces:
            # The common path, written out: a call for each frame costs a tenth of the whole.
            try:
                body = cobs.decode(piece)
            except cobs.DecodeError:
                found.append(self._drop(piece, b""))
                continue
            if _crc32c(body) == _GOOD_RESIDUE and CHECK_BYTES < len(body) <= MAX_FRAME_BYTES:
                found.append(body[:-CHECK_BYTES])
            elif piece:
                found.append(self._drop(piece, body))
        self.frames += len(found) - (self.dropped - dropped_before)
        return found

    def reset(self) -> None:
        """Forget a piece begun, as after a link was closed and opened again."""
        self._held = b""

    def _drop(self, piece: bytes, body: bytes) -> Dropped:
        """Say why a piece was dropped; ``body`` is empty where the stuffing was bad."""
        self.dropped += 1
        if len(piece) > MAX_STUFFED_BYTES:
            reason = Drop.TOO_LONG
        elif not body and piece != b"\x01":
            reason = Drop.STUFFING
        elif len(body) <= CHECK_BYTES:
            reason = Drop.TOO_SHORT
        else:
            reason = Drop.DAMAGED
        return Dropped(reason, piece[:_RAW_BYTES])
