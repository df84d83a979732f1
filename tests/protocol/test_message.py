"""Layouts and packing: each message there and back, bytes worked by hand, bad bytes refused."""

import re
import struct

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol import message
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS, WIRE_VERSION, Code
from protocol.errors import LocalProtocolError, RemoteProtocolError
from protocol.frame import MAX_PAYLOAD_BYTES
from protocol.message import (
    CODES,
    HEADER,
    LAYOUTS,
    MAX_BODY_BYTES,
    Answer,
    Facts,
    LockOut,
    Message,
    Nameplate,
    Packet,
    Pivot,
    Presence,
    Query,
    Release,
    Rest,
    RollCall,
    SettingWrite,
    Spin,
    Stop,
    Telemetry,
    TraceChunk,
    decode,
    encode,
    field_text,
    text_field,
)

STEADY = settings(derandomize=True, deadline=None)
"""The same examples each time, and no deadline on a busy machine."""

_RANGES = {
    "B": st.integers(0, 2**8 - 1),
    "H": st.integers(0, 2**16 - 1),
    "I": st.integers(0, 2**32 - 1),
    "Q": st.integers(0, 2**64 - 1),
    "b": st.integers(-(2**7), 2**7 - 1),
    "h": st.integers(-(2**15), 2**15 - 1),
    "i": st.integers(-(2**31), 2**31 - 1),
    "12s": st.binary(min_size=12, max_size=12),
    "24s": st.binary(min_size=24, max_size=24),
}


def formats(code: int) -> list[str]:
    """The struct codes of a layout, one a field."""
    return re.findall(r"\d*[a-zA-Z]", LAYOUTS[code].body.format)


@st.composite
def packets(draw: st.DrawFn) -> Packet:
    code = draw(st.sampled_from(sorted(LAYOUTS)))
    values = [draw(_RANGES[each]) for each in formats(code)]
    made: Message = LAYOUTS[code].message_type(*values)
    return Packet(draw(_RANGES["H"]), draw(_RANGES["H"]), made)


@STEADY
@given(packets())
def test_there_and_back(packet: Packet) -> None:
    assert decode(encode(packet)) == packet


@STEADY
@given(packets())
def test_decode_gives_the_very_types(packet: Packet) -> None:
    got = decode(encode(packet))
    assert type(got) is Packet
    assert type(got.message) is type(packet.message)


@pytest.mark.parametrize(
    ("packet", "wire"),
    [
        # By hand: version, code, destination, source, body; all low byte first.
        (Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Stop(3)), "01 20 ffff 0100 03000000"),
        (
            Packet(0xFFFF, 1, RollCall(0x01020304, 0xA1B2C3D4)),
            "01 01 ffff 0100 04030201 d4c3b2a1",
        ),
        (Packet(0x10, 1, Query(1, 2, 3)), "01 02 1000 0100 01000000 02000000 0300"),
        (
            Packet(0x10, 1, Pivot(1, 2, 3, 0xBEEF, 0x1234, 9, 1, -1, 4700)),
            "01 10 1000 0100 01000000 02000000 0300 efbe 34120000 09 01 ff 5c12",
        ),
        (
            Packet(0x10, 1, Spin(1, 2, 3, 4, 0x1234, -2, 500)),
            "01 11 1000 0100 01000000 02000000 0300 0400 34120000 feff f401",
        ),
        (Packet(0x10, 1, Rest(1, 2, 3, 4)), "01 12 1000 0100 01000000 02000000 0300 0400"),
        (
            Packet(1, 0x10, Answer(1, 2, 3, 2, 5, 0)),
            "01 84 0100 1000 01000000 02000000 0300 02 05 0000",
        ),
        (
            Packet(1, 0x10, Telemetry(2, 3, 4, 1, 5, 6, -300, 3700, -50, 899, 0xBEEF)),
            "01 83 0100 1000 02000000 0300 04000000 01 05 06 d4fe 740e ceff 8303 efbe",
        ),
    ],
)
def test_bytes_by_hand(packet: Packet, wire: str) -> None:
    assert encode(packet) == bytes.fromhex(wire)
    assert decode(bytes.fromhex(wire)) == packet


def test_every_code_has_exactly_one_layout() -> None:
    assert set(LAYOUTS) == set(Code)
    assert sorted(CODES.values()) == sorted(Code)


@pytest.mark.parametrize("code", sorted(LAYOUTS))
def test_layouts_leave_room_for_a_seal_of_sixteen_bytes(code: int) -> None:
    body = LAYOUTS[code].body
    assert body.size <= MAX_BODY_BYTES
    assert HEADER.size + body.size + 16 <= MAX_PAYLOAD_BYTES
    assert body.size == struct.calcsize("<" + "".join(formats(code)))


@pytest.mark.parametrize("code", sorted(LAYOUTS))
def test_a_body_one_byte_off_is_refused(code: int) -> None:
    good = HEADER.pack(WIRE_VERSION, code, 1, 0x10) + bytes(LAYOUTS[code].body.size)
    decode(good)
    for bad in (good[:-1], good + b"\0"):
        with pytest.raises(RemoteProtocolError, match=f"{Code(code).name} has a body of"):
            decode(bad)


@pytest.mark.parametrize("length", range(HEADER.size))
def test_less_than_a_header_is_no_message(length: int) -> None:
    with pytest.raises(RemoteProtocolError, match=f"{length} bytes are no message"):
        decode(bytes([WIRE_VERSION, Code.STOP, 0, 0, 0, 0])[:length])


def test_unknown_codes_are_refused() -> None:
    for code in set(range(256)) - set(Code):
        with pytest.raises(RemoteProtocolError, match=f"unknown message code 0x{code:02x}"):
            decode(HEADER.pack(WIRE_VERSION, code, 1, 0x10))


@pytest.mark.parametrize("version", [0, 2, 127])
def test_another_wire_version_is_refused_and_named(version: int) -> None:
    good = encode(Packet(1, 0x10, Stop(3)))
    with pytest.raises(RemoteProtocolError, match=f"wire version {version}"):
        decode(bytes([version]) + good[1:])
    with pytest.raises(RemoteProtocolError, match=f"wire version {version}"):
        decode(bytes([version, 0x7F]) + good[2:])  # a code that this version does not know


@STEADY
@given(st.binary(max_size=64))
def test_any_bytes_decode_or_are_refused_with_the_one_error(payload: bytes) -> None:
    try:
        packet = decode(payload)
    except RemoteProtocolError:
        return
    assert encode(packet) == payload


@STEADY
@given(st.sampled_from(sorted(LAYOUTS)), st.binary(max_size=40))
def test_any_body_under_a_good_header_does_too(code: int, body: bytes) -> None:
    payload = HEADER.pack(WIRE_VERSION, code, 1, 0x10) + body
    try:
        packet = decode(payload)
    except RemoteProtocolError:
        assert len(body) != LAYOUTS[code].body.size
        return
    assert encode(packet) == payload


@pytest.mark.parametrize(
    "packet",
    [
        Packet(1, 0x10, Stop(-1)),
        Packet(1, 0x10, Stop(2**32)),
        Packet(70_000, 0x10, Stop(1)),
        Packet(1, -1, Stop(1)),
        Packet(1, 0x10, Spin(1, 2, 3, 4, 5, 40_000, 5)),
        Packet(1, 0x10, SettingWrite(1, 2, 3, 4, 1, 2**31)),
        Packet(1, 0x10, LockOut(1, 2, 3, 4, b"thirteen byte")),
        Packet(1, 0x10, TraceChunk(1, 2, 3, 4, 5, bytes(25))),
        Packet(1, 0x10, Stop("3")),  # type: ignore[arg-type]
        Packet(1, 0x10, Stop(1.5)),  # type: ignore[arg-type]
        Packet(1, 0x10, "stop"),  # type: ignore[arg-type]
        Packet(1, 0x10, Nameplate(1, 2, 3, "name", b"kind")),  # type: ignore[arg-type]
        Packet(1, 0x10, Nameplate(1, 2, 3, b"thirteen byte", b"kind")),
        Packet(1, 0x10, Nameplate(1, 2, 3, b"name", b"thirteen byte")),
    ],
)
def test_what_does_not_fit_its_width_is_misuse(packet: Packet) -> None:
    with pytest.raises(LocalProtocolError):
        encode(packet)


def test_equality_is_strict_about_the_type() -> None:
    assert Release(3) != Stop(3)
    assert Stop(3) == Stop(3)
    assert hash(Stop(3)) == hash(Stop(3))
    assert Stop(3) != (3,)
    assert len({Release(3), Stop(3), Stop(3)}) == 2


@pytest.mark.parametrize(
    ("text", "field"),
    [
        ("birch", b"birch"),
        ("", b""),
        ("twelve bytes", b"twelve bytes"),
        ("thirteen byte", b"thirteen byt"),
        ("elevenbytesé", b"elevenbytes"),  # the accent would be bytes 12 and 13
        ("été" * 4, "étéétéé".encode()),
    ],
)
def test_text_is_cut_at_a_characters_border(text: str, field: bytes) -> None:
    assert text_field(text) == field
    assert text.startswith(field_text(field))


@STEADY
@given(st.text(st.characters(codec="utf-8", exclude_characters="\0")))
def test_text_comes_back_as_a_beginning_of_itself(text: str) -> None:
    nameplate = Nameplate(1, 2, 3, text_field(text), b"")
    got = decode(encode(Packet(1, 0x10, nameplate))).message
    assert isinstance(got, Nameplate)
    assert len(got.name) == 12
    assert text.startswith(field_text(got.name))


def test_bad_text_shows_as_such() -> None:
    assert field_text(b"ab\xff\0\0") == "ab\ufffd"


def test_the_longest_bodies_are_what_they_are_said_to_be() -> None:
    # By hand: 4+4+2+4x1+2+2+2+2+4+2+2+2+4, 8+2+2+12+12, 4+2+2+2+2+24 and 8+5x4+2+1+1.
    longest = (Facts, Nameplate, TraceChunk, Presence)
    sizes = {cls: LAYOUTS[CODES[cls]].body.size for cls in longest}
    assert sizes == {Facts: 36, Nameplate: 36, TraceChunk: 36, Presence: 32}
    assert max(layout.body.size for layout in LAYOUTS.values()) == MAX_BODY_BYTES


def test_what_is_exported_is_every_message_and_what_reads_them() -> None:
    names = {layout.message_type.__name__ for layout in LAYOUTS.values()}
    assert names < set(message.__all__)
    assert sorted(message.__all__) == sorted(set(message.__all__))
    assert all(hasattr(message, name) for name in message.__all__)
