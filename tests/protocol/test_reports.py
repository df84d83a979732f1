"""What a module or a bridge sends: which fields, in which order, how wide."""

import struct
from typing import Any, get_args

import pytest

from protocol import reports
from protocol.codes import Code
from protocol.errors import LocalProtocolError
from protocol.layout import HEADER_BYTES, LAYOUTS
from protocol.message import Packet, decode, encode
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
from protocol.requests import Query

FIELDS: dict[str, tuple[str, str]] = {
    # By hand, from WIRE.md: fields in order, and their widths as struct's letters.
    "Presence": (
        "identity boot epoch console stop_number time_ms owner_left_ms flags face_up",
        "QIIIIIHBB",
    ),
    "Nameplate": ("identity wheel_max_rpm firmware name kind", "QHH12s12s"),
    "Telemetry": (
        "boot sequence time_ms activity flags face_up wheel_rpm battery_mV temperature_cC"
        " tilt_ddeg identity_bits",
        "IHIBBBhHhhH",
    ),
    "Answer": ("epoch boot number state reason expect_ms", "IIHBBH"),
    "Facts": (
        "epoch boot number reason face_before face_after settled turned_ddeg peak_tilt_ddeg"
        " peak_rate_dps wheel_at_brake_rpm brake_us spin_up_ms settle_ms sag_mV started_ms",
        "IIHBBBBhhHHIHHHI",
    ),
    "Stopped": ("stop_number latched activity wheel_rpm boot identity_bits", "IBBhIH"),
    "Echo": ("boot sequence identity_bits received_us held_us", "IHHQI"),
    "LockState": ("boot identity_bits locked person", "IHB12s"),
    "SettingValue": (
        "boot identity_bits setting settings value lowest highest",
        "IHBBiii",
    ),
    "TraceChunk": ("boot number identity_bits chunk chunks data", "IHHHH24s"),
    "FaultNotice": ("boot identity_bits fault standing time_ms detail", "IHBBIh"),
    "BridgeStatus": (
        "sequence uptime_ms frames_from_console frames_to_console dropped queue queue_most"
        " signal_dBm noise_dBm",
        "HIIIIHHbb",
    ),
}
REPORTS = get_args(Report)
BEGIN_WITH_BOOT = (Telemetry, Echo, LockState, SettingValue, TraceChunk, FaultNotice)
UNITS = {"rpm", "ms", "us", "mV", "cC", "ddeg", "dps", "dBm"}


def forms(message_type: type[Any]) -> str:
    """The struct format of a message's body, without the sign for its byte order."""
    return next(
        each.body.format for each in LAYOUTS.values() if each.message_type is message_type
    ).lstrip("<")


@pytest.mark.parametrize("message_type", REPORTS)
def test_fields_in_their_order_and_width(message_type: type[Any]) -> None:
    names, widths = FIELDS[message_type.__name__]
    assert message_type._fields == tuple(names.split())
    assert forms(message_type) == widths


def test_every_report_is_in_the_union_and_no_request() -> None:
    from_modules = {each.message_type for code, each in LAYOUTS.items() if code & 0x80}
    assert set(REPORTS) == from_modules
    assert {each.__name__ for each in REPORTS} == set(FIELDS)
    assert all(each.__module__ == reports.__name__ for each in REPORTS)


@pytest.mark.parametrize("message_type", [Answer, Facts])
def test_what_is_said_of_a_command_begins_as_a_query_does(message_type: type[Any]) -> None:
    """So that a reply is matched by ten bytes at one place, whatever it is."""
    assert message_type._fields[:3] == Query._fields == ("epoch", "boot", "number")
    assert forms(message_type).startswith(forms(Query))


@pytest.mark.parametrize("message_type", BEGIN_WITH_BOOT)
def test_what_is_true_of_one_boot_begins_with_it(message_type: type[Any]) -> None:
    assert message_type._fields[0] == "boot"


@pytest.mark.parametrize(
    "message_type", [each for each in REPORTS if each not in (Answer, Facts, BridgeStatus)]
)
def test_a_module_always_says_which_box_it_is(message_type: type[Any]) -> None:
    """Addresses may be given twice; identities cannot. An answer is matched by its command."""
    assert {"identity", "identity_bits"} & set(message_type._fields)


@pytest.mark.parametrize("message_type", [Presence, Nameplate])
def test_the_whole_identity_stands_first_where_it_stands(message_type: type[Any]) -> None:
    assert message_type._fields[0] == "identity"
    assert forms(message_type)[0] == "Q"


def test_presence_carries_its_epoch_behind_its_boot() -> None:
    """A console's gate and a small bridge read them at one place: offsets 14 and 18."""
    before = forms(Presence)[: Presence._fields.index("boot")]
    assert HEADER_BYTES + struct.calcsize("<" + before) == 14
    assert Presence._fields[1:4] == ("boot", "epoch", "console")


def test_presence_and_telemetry_report_conditions_in_the_same_flags() -> None:
    for message_type in (Presence, Telemetry):
        at = message_type._fields.index("flags")
        assert forms(message_type)[at] == "B"
        assert message_type._fields[at + 1] == "face_up"


def test_the_start_of_a_motion_came_last_and_moved_nothing() -> None:
    assert Facts._fields[-1] == "started_ms"
    assert LAYOUTS[Code.FACTS].body.size == 36


def test_the_whole_of_a_presence_by_hand() -> None:
    presence = Presence(
        0x0102030405060708, 0x090A0B0C, 0x0D0E0F10, 0x11121314, 0x15161718, 0x191A1B1C, 0x1D1E,
        0x1F, 0x20,
    )  # fmt: skip
    packed = LAYOUTS[Code.PRESENCE].body.pack(*presence)
    assert packed.hex(" ") == (
        "08 07 06 05 04 03 02 01 0c 0b 0a 09 10 0f 0e 0d 14 13 12 11 18 17 16 15 1c 1b 1a 19"
        " 1e 1d 1f 20"
    )


def test_the_whole_of_an_echo_by_hand() -> None:
    echo = Echo(0x01020304, 0x0506, 0x0708, 0x090A0B0C0D0E0F10, 0x11121314)
    packed = LAYOUTS[Code.ECHO].body.pack(*echo)
    assert packed.hex(" ") == "04 03 02 01 06 05 08 07 10 0f 0e 0d 0c 0b 0a 09 14 13 12 11"


def test_a_clock_in_microseconds_does_not_wrap_while_anybody_lives() -> None:
    at = Echo._fields.index("received_us")
    years = (2 ** (8 * struct.calcsize(forms(Echo)[at])) - 1) / 1e6 / 86_400 / 365
    assert years > 500_000


@pytest.mark.parametrize("message_type", REPORTS)
def test_a_unit_is_the_last_part_of_a_name_that_measures(message_type: type[Any]) -> None:
    measured = (
        *("rpm", "tilt", "turned", "rate", "battery", "temperature", "signal", "noise"),
        *("time", "uptime", "received", "held", "brake", "spin_up", "settle_", "sag"),
    )
    for name in message_type._fields:
        if name.startswith(measured):
            assert name.rsplit("_", 1)[-1] in UNITS, name


OUT_OF_RANGE = [
    Presence(2**64, 1, 2, 3, 4, 5, 6, 7, 1),
    Presence(1, 1, 2, 3, 4, 5, 2**16, 7, 1),
    Presence(1, 1, 2, 3, 4, 5, 6, 256, 1),
    Telemetry(1, 2, 3, 4, 5, 6, 40_000, 4000, 2000, 0, 9),
    Answer(1, 2, 3, 4, 5, 2**16),
    Facts(1, 2, 3, 0, 1, 2, 1, 2**15, *[0] * 8),
    Facts(1, 2, 3, 0, 1, 2, 1, 900, *[0] * 7, 2**32),
    Stopped(1, 256, 0, 0, 2, 3),
    Echo(1, 2, 3, 2**64, 0),
    Echo(1, 2, 3, 0, 2**32),
    LockState(1, 2, 1, bytes(13)),
    SettingValue(1, 2, 3, 4, 2**31, 0, 0),
    SettingValue(1, 2, 3, 4, 0, -(2**31) - 1, 0),
    TraceChunk(1, 2, 3, 2**16, 5, bytes(24)),
    FaultNotice(1, 2, 3, 1, 5, -(2**15) - 1),
    BridgeStatus(1, 2, 3, 4, 5, 6, 7, -129, 0),
    BridgeStatus(1, 2, 3, 4, 5, 6, 7, 128, 0),
]


@pytest.mark.parametrize("message", OUT_OF_RANGE, ids=str)
def test_a_value_past_its_width_is_refused(message: Any) -> None:
    with pytest.raises(LocalProtocolError):
        encode(Packet(1, 0x11, message))


@pytest.mark.parametrize(
    "message",
    [
        Echo(0, 0, 0, 2**64 - 1, 2**32 - 1),
        SettingValue(1, 2, 3, 4, -(2**31), 2**31 - 1, -(2**31)),
        TraceChunk(1, 2, 3, 0, 0, b"\xff" * 24),
        FaultNotice(1, 2, 255, 255, 2**32 - 1, -(2**15)),
        BridgeStatus(1, 2, 3, 4, 5, 6, 7, -128, 127),
    ],
    ids=str,
)
def test_the_last_value_that_fits_comes_back(message: Any) -> None:
    assert decode(encode(Packet(1, 0x11, message))).message == message
