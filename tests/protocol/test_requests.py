"""What a console sends: which fields, in which order, how wide, and what all commands share."""

import struct
from typing import Any, get_args

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol import requests
from protocol.codes import Code, Direction, Setting
from protocol.errors import LocalProtocolError
from protocol.layout import HEADER_BYTES, LAYOUTS
from protocol.message import Packet, decode, encode
from protocol.requests import (
    BOUND_UNKNOWN,
    Command,
    Drive,
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
    SettingWrite,
    Slot,
    Spin,
    TraceAsk,
    Twist,
    Unlock,
)

ENVELOPE = ("epoch", "boot", "number", "identity_bits")

FIELDS: dict[str, tuple[str, str]] = {
    # By hand, from WIRE.md: fields in order, and their widths as struct's letters.
    "RollCall": ("epoch console", "II"),
    "Query": ("epoch boot number", "IIH"),
    "Probe": ("console boot sequence identity_bits offset_ms bound_ms", "IIHHIH"),
    "Permit": ("console expiry_ms", "II"),
    "Release": ("console", "I"),
    "Go": ("console stage start_ms", "IBI"),
    "SettingAsk": ("setting", "B"),
    "TraceAsk": ("epoch boot number identity_bits first wanted", "IIHHHI"),
    "BridgeAsk": ("sequence", "H"),
    "Slot": ("console boot period_ms identity_bits phase_ms", "IIHHH"),
    "Pivot": (
        "epoch boot number identity_bits latest_ms stage setting direction speed_rpm",
        "IIHHIBBbH",
    ),
    "Spin": ("epoch boot number identity_bits latest_ms speed_rpm hold_ms", "IIHHIhH"),
    "Rest": ("epoch boot number identity_bits", "IIHH"),
    "Flash": ("epoch boot number identity_bits duration_ms", "IIHHH"),
    "Hop": ("epoch boot number identity_bits latest_ms stage direction speed_rpm", "IIHHIBbH"),
    "Twist": ("epoch boot number identity_bits latest_ms stage direction speed_rpm", "IIHHIBbH"),
    "LockOut": ("epoch boot number identity_bits person", "IIHH12s"),
    "Unlock": ("epoch boot number identity_bits person", "IIHH12s"),
    "SettingWrite": ("epoch boot number identity_bits setting value", "IIHHBi"),
    "Stop": ("stop_number", "I"),
    "Clear": ("stop_number", "I"),
}
REQUESTS = get_args(Request)
COMMANDS = get_args(Command)


def forms(message_type: type[Any]) -> str:
    """The struct format of a message's body, without the sign for its byte order."""
    return next(
        each.body.format for each in LAYOUTS.values() if each.message_type is message_type
    ).lstrip("<")


@pytest.mark.parametrize("message_type", REQUESTS)
def test_fields_in_their_order_and_width(message_type: type[Any]) -> None:
    names, widths = FIELDS[message_type.__name__]
    assert message_type._fields == tuple(names.split())
    assert forms(message_type) == widths


def test_every_request_is_in_the_union_and_no_report() -> None:
    from_console = {each.message_type for code, each in LAYOUTS.items() if not code & 0x80}
    assert set(REQUESTS) == from_console
    assert {each.__name__ for each in REQUESTS} == set(FIELDS)
    assert all(each.__module__ == requests.__name__ for each in REQUESTS)


def test_the_codes_of_commands_are_0x10_to_0x1f() -> None:
    numbered = {each.message_type for code, each in LAYOUTS.items() if 0x10 <= code <= 0x1F}
    assert numbered == set(COMMANDS)


@pytest.mark.parametrize("message_type", COMMANDS)
def test_one_envelope_for_all_commands(message_type: type[Any]) -> None:
    """A module judges it before it knows which command it is: same fields at the same places."""
    assert message_type._fields[:4] == ENVELOPE
    assert forms(message_type).startswith("IIHH")


@pytest.mark.parametrize("message_type", get_args(Drive))
def test_whatever_turns_the_wheel_has_a_latest_start_behind_the_envelope(
    message_type: type[Any],
) -> None:
    assert message_type._fields[4] == "latest_ms"
    assert forms(message_type)[4] == "I"


def test_nothing_else_has_a_latest_start() -> None:
    late = {each for each in REQUESTS if "latest_ms" in each._fields}
    assert late == set(get_args(Drive)) == {Pivot, Hop, Twist, Spin}


@pytest.mark.parametrize("message_type", get_args(Motion))
def test_every_motion_has_a_stage_at_the_same_place(message_type: type[Any]) -> None:
    assert message_type._fields[5] == "stage"
    assert forms(message_type)[5] == "B"


def test_nothing_else_can_be_staged() -> None:
    staged = {each for each in REQUESTS if "stage" in each._fields}
    assert staged == {*get_args(Motion), Go} == {Pivot, Hop, Twist, Go}
    assert set(get_args(Motion)) < set(get_args(Drive)) < set(COMMANDS)


@pytest.mark.parametrize("message_type", [*COMMANDS, Query, Probe, TraceAsk, Slot])
def test_the_boot_stands_at_offset_10_of_all_that_have_one(message_type: type[Any]) -> None:
    """A small module compares four bytes at one place, whatever the message."""
    before = forms(message_type)[: message_type._fields.index("boot")]
    assert HEADER_BYTES + struct.calcsize("<" + before) == 10


def test_nothing_else_of_a_console_carries_a_boot() -> None:
    with_boot = {each for each in REQUESTS if "boot" in each._fields}
    assert with_boot == {*COMMANDS, Query, Probe, TraceAsk, Slot}


@pytest.mark.parametrize("message_type", [*COMMANDS, Probe, TraceAsk, Slot])
def test_the_box_stands_at_offset_16_of_all_that_name_one(message_type: type[Any]) -> None:
    before = forms(message_type)[: message_type._fields.index("identity_bits")]
    assert HEADER_BYTES + struct.calcsize("<" + before) == 16


@pytest.mark.parametrize("message_type", [Probe, Permit, Release, Go, Slot])
def test_what_only_the_followed_console_may_say_begins_with_its_number(
    message_type: type[Any],
) -> None:
    assert message_type._fields[0] == "console"
    assert RollCall._fields[1] == "console"


def test_the_whole_of_a_motion_by_hand() -> None:
    hop = Hop(0x01020304, 0x05060708, 0x090A, 0x0B0C, 0x0D0E0F10, 17, Direction.BACK, 0x1213)
    packed = LAYOUTS[Code.HOP].body.pack(*hop)
    assert packed.hex(" ") == "04 03 02 01 08 07 06 05 0a 09 0c 0b 10 0f 0e 0d 11 ff 13 12"


def test_the_whole_of_a_probe_by_hand() -> None:
    probe = Probe(0x01020304, 0x05060708, 0x090A, 0x0B0C, 0x0D0E0F10, BOUND_UNKNOWN)
    packed = LAYOUTS[Code.PROBE].body.pack(*probe)
    assert packed.hex(" ") == "04 03 02 01 08 07 06 05 0a 09 0c 0b 10 0f 0e 0d ff ff"


ENVELOPE_HEX = "04 03 02 01 08 07 06 05 0a 09 0c 0b"
BY_HAND = [
    (Query(0x01020304, 0x05060708, 0x090A), "04 03 02 01 08 07 06 05 0a 09"),
    (Permit(0x01020304, 0x05060708), "04 03 02 01 08 07 06 05"),
    (Rest(0x01020304, 0x05060708, 0x090A, 0x0B0C), ENVELOPE_HEX),
    (Go(0x01020304, 0x05, 0x06070809), "04 03 02 01 05 09 08 07 06"),
    (
        TraceAsk(0x01020304, 0x05060708, 0x090A, 0x0B0C, 0x0D0E, 0x0F101112),
        f"{ENVELOPE_HEX} 0e 0d 12 11 10 0f",
    ),
    (
        Pivot(0x01020304, 0x05060708, 0x090A, 0x0B0C, 0x0D0E0F10, 17, 18, 1, 0x1314),
        f"{ENVELOPE_HEX} 10 0f 0e 0d 11 12 01 14 13",
    ),
    (
        # -3000 in two's complement of 16 bits is 0x10000 - 0x0bb8 = 0xf448.
        Spin(0x01020304, 0x05060708, 0x090A, 0x0B0C, 0x0D0E0F10, -3000, 0x1112),
        f"{ENVELOPE_HEX} 10 0f 0e 0d 48 f4 12 11",
    ),
    (
        SettingWrite(0x01020304, 0x05060708, 0x090A, 0x0B0C, 4, -2),
        f"{ENVELOPE_HEX} 04 fe ff ff ff",
    ),
    (
        # RFC 3629: e with diaeresis, U+00EB, is c3 ab in UTF-8.
        LockOut(0x01020304, 0x05060708, 0x090A, 0x0B0C, "Zo\u00eb".encode()),
        f"{ENVELOPE_HEX} 5a 6f c3 ab 00 00 00 00 00 00 00 00",
    ),
]


@pytest.mark.parametrize(("message", "body"), BY_HAND, ids=lambda each: type(each).__name__)
def test_other_bodies_by_hand(message: Any, body: str) -> None:
    payload = encode(_packet(message))
    assert payload[HEADER_BYTES:].hex(" ") == body
    assert encode(decode(payload)) == payload


def test_a_bound_that_is_not_known_is_the_greatest_that_fits() -> None:
    assert BOUND_UNKNOWN == 2**16 - 1
    sent = requests.Probe(1, 2, 3, 4, 0, BOUND_UNKNOWN)
    packet = decode(encode(_packet(sent)))
    assert packet.message == sent


def _packet(message: Any) -> Packet:
    return Packet(0x11, 1, message)


OUT_OF_RANGE = [
    RollCall(2**32, 1),
    RollCall(-1, 1),
    Probe(1, 2, 2**16, 4, 0, 5),
    Probe(1, 2, 3, 4, 2**32, 5),
    Probe(1, 2, 3, 4, 0, 2**16),
    Permit(1, -1),
    Release(2**32),
    Go(1, 256, 0),
    TraceAsk(1, 2, 3, 4, 5, 2**32),
    TraceAsk(1, 2, 3, 4, 2**16, 1),
    Pivot(1, 2, 3, 4, 5, 0, Setting.FLOOR, 200, 4000),
    Pivot(1, 2, 3, 4, 2**32, 0, Setting.FLOOR, 1, 4000),
    Pivot(1, 2, 3, 4, 5, 256, Setting.FLOOR, 1, 4000),
    Hop(1, 2, 3, 4, 5, 0, 1, 2**16),
    Twist(1, 2, 3, 4, 5, 0, 1, -1),
    Spin(1, 2, 3, 4, 5, 2**15, 100),
    Spin(1, 2, 3, 4, 5, -(2**15) - 1, 100),
    SettingWrite(1, 2, 3, 4, 1, 2**31),
    SettingWrite(1, 2, 3, 4, 1, -(2**31) - 1),
    LockOut(1, 2, 3, 4, bytes(13)),
    Unlock(1, 2, 3, 4, bytes(13)),
    Rest(1, 2, 2**16, 4),
]


@pytest.mark.parametrize("message", OUT_OF_RANGE, ids=str)
def test_a_value_past_its_width_is_refused(message: Any) -> None:
    with pytest.raises(LocalProtocolError):
        encode(_packet(message))


@given(
    epoch=st.integers(0, 2**32 - 1),
    boot=st.integers(0, 2**32 - 1),
    number=st.integers(0, 2**16 - 1),
    bits=st.integers(0, 2**16 - 1),
    message_type=st.sampled_from(COMMANDS),
)
def test_the_envelope_is_read_the_same_way_of_every_command(
    epoch: int, boot: int, number: int, bits: int, message_type: type[Any]
) -> None:
    layout = next(each for each in LAYOUTS.values() if each.message_type is message_type)
    rest = layout.make(layout.body.unpack(bytes(layout.body.size)))[4:]
    sent = message_type(epoch, boot, number, bits, *rest)
    payload = encode(_packet(sent))
    assert struct.unpack_from("<IIHH", payload, 6) == (epoch, boot, number, bits)
    assert decode(payload).message == sent
