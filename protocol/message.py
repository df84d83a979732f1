"""Typed messages, packed and unpacked: one frame's payload, header and body.

Owns packing and unpacking by the table that the declarations fill (layout.py), and is where
everybody else imports messages from. Without check, stuffing or seal; knows nothing of time or
links.
"""

import struct
from collections.abc import Callable
from functools import partial
from typing import Any, Final, NamedTuple, cast

from protocol.codes import WIRE_VERSION, Code
from protocol.errors import LocalProtocolError, RemoteProtocolError
from protocol.layout import (
    CODES,
    HEADER,
    HEADER_BYTES,
    LAYOUTS,
    MAX_BODY_BYTES,
    READERS,
    TEXT_BYTES,
)
from protocol.reports import (
    Answer,
    BridgeStatus,
    Echo,
    Facts,
    FaultNotice,
    LockState,
    Nameplate,
    Presence,
    Report,
    SettingValue,
    Stopped,
    Telemetry,
    TraceChunk,
)
from protocol.requests import (
    BOUND_UNKNOWN,
    BridgeAsk,
    Clear,
    Command,
    Drive,
    Flash,
    Go,
    Hop,
    LockOut,
    Motion,
    Permit,
    Pivot,
    Probe,
    Query,
    Release,
    Request,
    Rest,
    RollCall,
    SettingAsk,
    SettingWrite,
    Slot,
    Spin,
    Stop,
    TraceAsk,
    Twist,
    Unlock,
)

__all__ = [
    "BOUND_UNKNOWN",
    "CODES",
    "HEADER",
    "LAYOUTS",
    "MAX_BODY_BYTES",
    "TEXT_BYTES",
    "Answer",
    "BridgeAsk",
    "BridgeStatus",
    "Clear",
    "Command",
    "Drive",
    "Echo",
    "Facts",
    "FaultNotice",
    "Flash",
    "Go",
    "Hop",
    "LockOut",
    "LockState",
    "Message",
    "Motion",
    "Nameplate",
    "Packet",
    "Permit",
    "Pivot",
    "Presence",
    "Probe",
    "Query",
    "Release",
    "Report",
    "Request",
    "Rest",
    "RollCall",
    "SettingAsk",
    "SettingValue",
    "SettingWrite",
    "Slot",
    "Spin",
    "Stop",
    "Stopped",
    "Telemetry",
    "TraceAsk",
    "TraceChunk",
    "Twist",
    "Unlock",
    "decode",
    "encode",
    "field_text",
    "text_field",
]

Message = Request | Report

_SEALED_BIT: Final = 0x80
"""In the version byte: the payload is sealed and must be opened first (seal.py)."""


class Packet(NamedTuple):
    """One message and the two addresses it travels between."""

    destination: int
    source: int
    message: Message


_make_packet: Final[Callable[[Any], Packet]] = partial(cast(Any, tuple.__new__), Packet)


def encode(packet: Packet) -> bytes:
    """Pack header and body. Raises LocalProtocolError where a field does not fit its width."""
    message = packet.message
    try:
        code = CODES[type(message)]
        layout = LAYOUTS[code]
        for place, width in layout.texts:
            if len(cast(Any, message)[place]) > width:
                # struct would cut the text without a word, perhaps within a character.
                raise LocalProtocolError(f"a text has at most {width} bytes; see text_field")
        head = HEADER.pack(WIRE_VERSION, code, packet.destination, packet.source)
        return head + layout.body.pack(*message)
    except (KeyError, TypeError, struct.error) as error:
        raise LocalProtocolError(f"cannot encode {message!r}: {error}") from error


def decode(payload: bytes) -> Packet:
    """Unpack header and body of one checked frame.

    Raises RemoteProtocolError for another wire version, an unknown code, or a body whose
    length is not exactly its layout's.
    """
    try:
        version, code, destination, source = HEADER.unpack_from(payload)
        unpack_from, payload_bytes, make = READERS[code]
        if version == WIRE_VERSION and len(payload) == payload_bytes:
            fields = unpack_from(payload, HEADER_BYTES)
            return _make_packet((destination, source, make(fields)))
    except struct.error as error:
        raise RemoteProtocolError(f"{len(payload)} bytes are no message") from error
    except KeyError as error:
        raise RemoteProtocolError(_complaint(version, code, len(payload))) from error
    raise RemoteProtocolError(_complaint(version, code, len(payload)))


def _complaint(version: int, code: int, n_bytes: int) -> str:
    """Say what is wrong with a payload; its version comes first, since codes depend on it."""
    if version & _SEALED_BIT:
        return "sealed, and opened by nobody here"
    if version != WIRE_VERSION:
        return f"wire version {version}, spoken here is {WIRE_VERSION}"
    if code not in LAYOUTS:
        return f"unknown message code 0x{code:02x}"
    expected = LAYOUTS[code].body.size
    return f"{Code(code).name} has a body of {n_bytes - HEADER_BYTES} bytes, not {expected}"


def text_field(text: str, width: int = TEXT_BYTES) -> bytes:
    """Encode ``text`` for a Text12 field, cut at a character's border."""
    return text.encode()[:width].decode(errors="ignore").encode()


def field_text(field: bytes) -> str:
    """Read a Text12 field; bytes that are no UTF-8 show as the replacement character."""
    return field.rstrip(b"\0").decode(errors="replace")
