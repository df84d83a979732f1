"""Reading one whole frame, where it is known that it is one.

Owns nothing: a step that bridge and stations share. What comes in pieces goes through a decoder of
the receiver's own.
"""

from protocol.errors import RemoteProtocolError
from protocol.frame import Dropped, FrameDecoder
from protocol.message import Packet, decode


def understood(frame_bytes: bytes) -> Packet | None:
    """Read one whole frame; None where it is damaged or no message of this version."""
    for found in FrameDecoder().feed(frame_bytes):
        if not isinstance(found, Dropped):
            try:
                return decode(found)
            except RemoteProtocolError:
                return None
    return None
