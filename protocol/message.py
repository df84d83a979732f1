"""Typed messages and their layouts: one declaration a message, field by field.

Owns the table from code to layout, and packing and unpacking of one frame's payload
(header and body, without check or stuffing). Knows nothing of framing, time or links.

A declaration is a NamedTuple whose annotations give each field's width on the wire; the unit
is in the field's name. NamedTuple and not a frozen dataclass because a frozen, slotted
dataclass of nine fields takes 1.6 us to make and a tuple 0.23 us (CPython 3.11, measured), and
this is the hottest path of the console. Equality is strict about the type, as a dataclass's is.

Payload: version u8, code u8, destination u16, source u16, body. All little-endian.
"""

import struct
from collections.abc import Callable
from functools import partial
from typing import Annotated, Any, Final, NamedTuple, TypeVar, cast, get_args, get_type_hints

from protocol.codes import WIRE_VERSION, Code
from protocol.errors import LocalProtocolError, RemoteProtocolError

HEADER: Final = struct.Struct("<BBHH")
_HEADER_BYTES: Final = HEADER.size
MAX_BODY_BYTES: Final = 36
"""62 bytes a frame before stuffing, less header 6, check 4, and 16 kept free for the seal."""

TEXT_BYTES: Final = 12

U8 = Annotated[int, "B"]
U16 = Annotated[int, "H"]
U32 = Annotated[int, "I"]
U64 = Annotated[int, "Q"]
I8 = Annotated[int, "b"]
I16 = Annotated[int, "h"]
Text12 = Annotated[bytes, "12s"]
"""UTF-8, cut to 12 bytes at a character's border, padded with zero bytes."""

_MessageT = TypeVar("_MessageT")


class _Layout(NamedTuple):
    """What is known of one message: its class, its body's struct, its constructor."""

    message_type: type[Any]
    body: struct.Struct
    make: Callable[[Any], Any]


class _Reader(NamedTuple):
    """What decoding needs of a layout, looked up beforehand: it is the console's hottest path."""

    unpack_from: Callable[[bytes, int], tuple[Any, ...]]
    payload_bytes: int
    make: Callable[[Any], Any]


LAYOUTS: Final[dict[int, _Layout]] = {}
_SEALED_BIT: Final = 0x80
"""In the version byte: the payload is sealed and must be opened first (seal.py)."""

_READERS: Final[dict[int, _Reader]] = {}
CODES: Final[dict[type[Any], Code]] = {}


def _same(left: object, right: object) -> bool:
    return type(left) is type(right) and tuple.__eq__(cast(Any, left), cast(Any, right))


def _declare(code: Code) -> Callable[[type[_MessageT]], type[_MessageT]]:
    """Enter the decorated NamedTuple in the table under ``code``."""

    def enter(cls: type[_MessageT]) -> type[_MessageT]:
        hints = get_type_hints(cls, include_extras=True)
        body = struct.Struct("<" + "".join(get_args(hint)[1] for hint in hints.values()))
        if body.size > MAX_BODY_BYTES:
            raise LocalProtocolError(f"{cls.__name__}: {body.size} bytes leave no room for a seal")
        named = cast(Any, cls)
        named.__eq__ = _same
        named.__ne__ = lambda left, right: not _same(left, right)
        named.__hash__ = lambda self: hash((cls, tuple(self)))
        # tuple.__new__ and not _make: the struct has already fixed the length that _make would
        # check, and the check costs a third of the making.
        make = partial(cast(Any, tuple.__new__), cls)
        LAYOUTS[code] = _Layout(cls, body, make)
        _READERS[code] = _Reader(body.unpack_from, _HEADER_BYTES + body.size, make)
        CODES[cls] = code
        return cls

    return enter


@_declare(Code.ROLL_CALL)
class RollCall(NamedTuple):
    """Asks who is there and offers a console epoch; a module adopts a newer one only.

    Answered by Presence and Nameplate. Adopting an epoch empties the command memory.
    """

    epoch: U32


@_declare(Code.QUERY)
class Query(NamedTuple):
    """Asks again for the answer to a command; never causes it to be carried out."""

    epoch: U32
    boot: U32
    number: U16


@_declare(Code.PIVOT)
class Pivot(NamedTuple):
    """Command: spin up to ``speed_rpm`` so that braking turns the body in ``direction``."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    setting: U8
    direction: I8
    speed_rpm: U16


@_declare(Code.SPIN)
class Spin(NamedTuple):
    """Command: bring the wheel to a signed speed, hold it so long, then rest gently."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    speed_rpm: I16
    hold_ms: U16


@_declare(Code.REST)
class Rest(NamedTuple):
    """Command: bring the wheel gently to a stop with the motor. Never blocked."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16


@_declare(Code.FLASH)
class Flash(NamedTuple):
    """Command: light and beep for a time, so that a person can find the box."""

    epoch: U32
    boot: U32
    number: U16
    identity_bits: U16
    duration_ms: U16


@_declare(Code.STOP)
class Stop(NamedTuple):
    """All-stop number so-and-so: every wheel to rest, latched. Harmless to repeat."""

    stop_number: U32


@_declare(Code.CLEAR)
class Clear(NamedTuple):
    """Lifts the all-stop of this number, and only if it is the newest the module knows."""

    stop_number: U32


@_declare(Code.PRESENCE)
class Presence(NamedTuple):
    """A module's answer to a roll call: who it is and what it remembers."""

    identity: U64
    boot: U32
    epoch: U32
    stop_number: U32
    latched: U8
    face_up: U8
    time_ms: U32


@_declare(Code.NAMEPLATE)
class Nameplate(NamedTuple):
    """What is written on the box: name, kind, limits."""

    identity: U64
    wheel_max_rpm: U16
    firmware: U16
    name: Text12
    kind: Text12


@_declare(Code.TELEMETRY)
class Telemetry(NamedTuple):
    """What a module measures of itself, unasked. ``face_up`` 1 to 4 turn about the wheel
    axis, 5 and 6 are its ends, 0 is none (tilted)."""

    boot: U32
    sequence: U16
    time_ms: U32
    activity: U8
    flags: U8
    face_up: U8
    wheel_rpm: I16
    battery_mV: U16
    temperature_cC: I16
    tilt_ddeg: I16
    identity_bits: U16


@_declare(Code.ANSWER)
class Answer(NamedTuple):
    """What became of a command. ``expect_ms``: time until it should be finished."""

    epoch: U32
    boot: U32
    number: U16
    state: U8
    reason: U8
    expect_ms: U16


@_declare(Code.FACTS)
class Facts(NamedTuple):
    """The end of a motion: what was measured of it. Verdicts are drawn by the console.

    ``reason`` is NONE for a motion that ran its course, STOPPED or RESTED for one cut short.
    Angles in tenths of a degree, positive in the ordered direction.
    """

    epoch: U32
    boot: U32
    number: U16
    reason: U8
    face_before: U8
    face_after: U8
    settled: U8
    turned_ddeg: I16
    peak_tilt_ddeg: I16
    peak_rate_dps: U16
    wheel_at_brake_rpm: U16
    brake_us: U32
    spin_up_ms: U16
    settle_ms: U16
    sag_mV: U16


@_declare(Code.STOPPED)
class Stopped(NamedTuple):
    """A module's confirmation of a stop or a clear: the newest stop it knows, and its state."""

    stop_number: U32
    latched: U8
    activity: U8
    wheel_rpm: I16
    boot: U32
    identity_bits: U16


Command = Pivot | Spin | Rest | Flash
Message = (
    Command
    | RollCall
    | Query
    | Stop
    | Clear
    | Presence
    | Nameplate
    | Telemetry
    | Answer
    | Facts
    | Stopped
)


class Packet(NamedTuple):
    """One message and the two addresses it travels between."""

    destination: int
    source: int
    message: Message


_make_packet: Final[Callable[[Any], Packet]] = partial(cast(Any, tuple.__new__), Packet)


def encode(packet: Packet) -> bytes:
    """Pack header and body. Raises LocalProtocolError where a field does not fit its width."""
    message = packet.message
    if any(isinstance(value, bytes) and len(value) > TEXT_BYTES for value in message):
        # struct would cut the text without a word, perhaps within a character.
        raise LocalProtocolError(f"a text has at most {TEXT_BYTES} bytes; see text_field")
    try:
        code = CODES[type(message)]
        head = HEADER.pack(WIRE_VERSION, code, packet.destination, packet.source)
        return head + LAYOUTS[code].body.pack(*message)
    except (KeyError, struct.error) as error:
        raise LocalProtocolError(f"cannot encode {message!r}: {error}") from error


def decode(payload: bytes) -> Packet:
    """Unpack header and body of one checked frame.

    Raises RemoteProtocolError for another wire version, an unknown code, or a body whose
    length is not exactly its layout's.
    """
    try:
        version, code, destination, source = HEADER.unpack_from(payload)
        unpack_from, payload_bytes, make = _READERS[code]
        if version == WIRE_VERSION and len(payload) == payload_bytes:
            fields = unpack_from(payload, _HEADER_BYTES)
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
    return f"{Code(code).name} has a body of {n_bytes - _HEADER_BYTES} bytes, not {expected}"


def text_field(text: str, width: int = TEXT_BYTES) -> bytes:
    """Encode ``text`` for a Text12 field, cut at a character's border."""
    return text.encode()[:width].decode(errors="ignore").encode()


def field_text(field: bytes) -> str:
    """Read a Text12 field; bytes that are no UTF-8 show as the replacement character."""
    return field.rstrip(b"\0").decode(errors="replace")
