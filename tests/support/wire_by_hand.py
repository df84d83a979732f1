"""Payloads laid out by hand from WIRE.md's tables, byte for byte, with ``struct`` alone.

What the writers of vectors share. Nothing of protocol/ is imported, so that an error there cannot
agree with itself.
"""

import struct
from typing import Any

KEY = bytes(range(32))
EPOCH, BOOT, BITS = 1_700_000_000, 0x0A0B0C0D, 0x2211
IDENTITY = 0x8000_00AA_BBCC_2211
ANNA, BERT = 0x0A11CE01, 0x0B0B0B02
"""The numbers that two consoles drew."""
CONSOLE, BIRCH, ELM, EVERYONE = 0x0001, 0x0011, 0x0012, 0xFFFF

Vector = dict[str, Any]

# name, code, body format by hand, field names, ordinary values, extreme values
LAYOUTS: list[tuple[str, int, str, str, tuple[Any, ...], tuple[Any, ...]]] = [
    ("RollCall", 0x01, "II", "epoch console", (EPOCH, ANNA), (0xFFFFFFFF, 0)),
    ("Query", 0x02, "IIH", "epoch boot number", (EPOCH, BOOT, 7), (0, 0, 65535)),
    (
        "Probe",
        0x03,
        "IIHHIH",
        "console boot sequence identity_bits offset_ms bound_ms",
        (ANNA, BOOT, 41, BITS, 0xFFFFFC18, 12),
        (0xFFFFFFFF, 0, 65535, 65535, 0xFFFFFFFF, 65535),
    ),
    ("Permit", 0x04, "II", "console expiry_ms", (ANNA, 123_456), (0xFFFFFFFF, 0xFFFFFFFF)),
    ("Release", 0x05, "I", "console", (ANNA,), (0,)),
    ("Go", 0x06, "IBI", "console stage start_ms", (ANNA, 3, 98_765), (0, 255, 0xFFFFFFFF)),
    ("SettingAsk", 0x07, "B", "setting", (4,), (255,)),
    (
        "TraceAsk",
        0x08,
        "IIHHHI",
        "epoch boot number identity_bits first wanted",
        (EPOCH, BOOT, 7, BITS, 1, 0xFF),
        (0, 0xFFFFFFFF, 65535, 0, 65535, 0xFFFFFFFF),
    ),
    ("BridgeAsk", 0x09, "H", "sequence", (258,), (65535,)),
    (
        "Slot",
        0x0A,
        "IIHHH",
        "console boot period_ms identity_bits phase_ms",
        (ANNA, BOOT, 1000, BITS, 385),
        (0xFFFFFFFF, 0, 65535, 65535, 65535),
    ),
    (
        "Pivot",
        0x10,
        "IIHHIBBbH",
        "epoch boot number identity_bits latest_ms stage setting direction speed_rpm",
        (EPOCH, BOOT, 7, BITS, 45_000, 0, 1, 1, 5200),
        (0xFFFFFFFF, 0xFFFFFFFF, 65535, 65535, 0xFFFFFFFF, 255, 255, -128, 65535),
    ),
    (
        "Spin",
        0x11,
        "IIHHIhH",
        "epoch boot number identity_bits latest_ms speed_rpm hold_ms",
        (EPOCH, BOOT, 8, BITS, 45_000, -3000, 5000),
        (0, 0, 1, 0, 0xFFFFFFFF, -32768, 65535),
    ),
    (
        "Rest",
        0x12,
        "IIHH",
        "epoch boot number identity_bits",
        (EPOCH, BOOT, 9, BITS),
        (0, 0, 0, 0),
    ),
    (
        "Flash",
        0x13,
        "IIHHH",
        "epoch boot number identity_bits duration_ms",
        (EPOCH, BOOT, 10, BITS, 2000),
        (1, 1, 1, 1, 65535),
    ),
    (
        "Hop",
        0x14,
        "IIHHIBbH",
        "epoch boot number identity_bits latest_ms stage direction speed_rpm",
        (EPOCH, BOOT, 11, BITS, 45_000, 2, -1, 7000),
        (0, 0xFFFFFFFF, 1, 65535, 0, 255, 127, 65535),
    ),
    (
        "Twist",
        0x15,
        "IIHHIBbH",
        "epoch boot number identity_bits latest_ms stage direction speed_rpm",
        (EPOCH, BOOT, 12, BITS, 45_000, 0, 1, 4000),
        (0xFFFFFFFF, 0, 65535, 0, 0xFFFFFFFF, 0, -128, 0),
    ),
    (
        "LockOut",
        0x16,
        "IIHH12s",
        "epoch boot number identity_bits person",
        (EPOCH, BOOT, 13, BITS, "Zoë".encode()),
        (0, 0, 0, 0, b"p" * 12),
    ),
    (
        "Unlock",
        0x17,
        "IIHH12s",
        "epoch boot number identity_bits person",
        (EPOCH, BOOT, 14, BITS, b"Ada"),
        (1, 1, 1, 1, b""),
    ),
    (
        "SettingWrite",
        0x18,
        "IIHHBi",
        "epoch boot number identity_bits setting value",
        (EPOCH, BOOT, 15, BITS, 1, 7500),
        (0, 0, 0, 0, 255, -(2**31)),
    ),
    ("Stop", 0x20, "I", "stop_number", (3,), (0xFFFFFFFF,)),
    ("Clear", 0x21, "I", "stop_number", (3,), (0,)),
    (
        "Presence",
        0x81,
        "QIIIIIHBB",
        "identity boot epoch console stop_number time_ms owner_left_ms flags face_up",
        (IDENTITY, BOOT, EPOCH, ANNA, 3, 12345, 2990, 97, 2),
        (2**64 - 1, 0, 0, 0xFFFFFFFF, 0, 2**32 - 1, 65535, 255, 255),
    ),
    (
        "Nameplate",
        0x82,
        "QHH12s12s",
        "identity wheel_max_rpm firmware name kind",
        (IDENTITY, 9000, 256, b"birch", b"pebble"),
        (0, 65535, 65535, b"m" * 12, b"k" * 12),
    ),
    (
        "Telemetry",
        0x83,
        "IHIBBBhHhhH",
        "boot sequence time_ms activity flags face_up wheel_rpm battery_mV temperature_cC"
        " tilt_ddeg identity_bits",
        (BOOT, 513, 99_000, 2, 1, 1, -3000, 4120, 2150, -3, BITS),
        (0, 65535, 2**32 - 1, 255, 255, 0, -32768, 65535, -32768, 32767, 0),
    ),
    (
        "Answer",
        0x84,
        "IIHBBH",
        "epoch boot number state reason expect_ms",
        (EPOCH, BOOT, 7, 1, 0, 1500),
        (0, 0, 0, 255, 255, 65535),
    ),
    (
        "Facts",
        0x85,
        "IIHBBBBhhHHIHHHI",
        "epoch boot number reason face_before face_after settled turned_ddeg peak_tilt_ddeg"
        " peak_rate_dps wheel_at_brake_rpm brake_us spin_up_ms settle_ms sag_mV started_ms",
        (EPOCH, BOOT, 7, 0, 1, 2, 1, 900, 921, 700, 5205, 21_500, 790, 250, 560, 40_321),
        (
            *(0, 0, 0, 255, 0, 0, 0, -32768, 32767, 65535, 65535, 2**32 - 1),
            *(65535, 65535, 65535, 2**32 - 1),
        ),
    ),
    (
        "Stopped",
        0x86,
        "IBBhIH",
        "stop_number latched activity wheel_rpm boot identity_bits",
        (3, 1, 3, 2500, BOOT, BITS),
        (0, 0, 0, -32768, 0, 0),
    ),
    (
        "Echo",
        0x87,
        "IHHQI",
        "boot sequence identity_bits received_us held_us",
        (BOOT, 41, BITS, 5_123_456_789, 180),
        (0, 65535, 65535, 2**64 - 1, 2**32 - 1),
    ),
    (
        "LockState",
        0x88,
        "IHB12s",
        "boot identity_bits locked person",
        (BOOT, BITS, 1, b"Ada"),
        (0, 0, 255, b"p" * 12),
    ),
    (
        "SettingValue",
        0x89,
        "IHBBiii",
        "boot identity_bits setting settings value lowest highest",
        (BOOT, BITS, 1, 5, 7500, 500, 9000),
        (0, 0, 255, 255, -(2**31), 2**31 - 1, -1),
    ),
    (
        "TraceChunk",
        0x8A,
        "IHHHH24s",
        "boot number identity_bits chunk chunks data",
        (BOOT, 7, BITS, 2, 15, bytes(range(1, 25))),
        (0, 65535, 0, 65535, 65535, b"\xff" * 24),
    ),
    (
        "FaultNotice",
        0x8B,
        "IHBBIh",
        "boot identity_bits fault standing time_ms detail",
        (BOOT, BITS, 6, 1, 77_000, 612),
        (0, 0, 255, 255, 2**32 - 1, -32768),
    ),
    (
        "BridgeStatus",
        0x8C,
        "HIIIIHHbb",
        "sequence uptime_ms frames_from_console frames_to_console dropped queue queue_most"
        " signal_dBm noise_dBm",
        (258, 60_000, 1200, 3400, 5, 1, 9, -61, -97),
        (65535, *(2**32 - 1,) * 4, 65535, 65535, -128, 127),
    ),
]

_TO_EVERYONE = ("RollCall", "Permit", "Release", "Go", "Stop", "Clear")


def payload(code: int, form: str, values: tuple[Any, ...], to: int, by: int) -> bytes:
    """Header and body, low byte first."""
    return struct.pack("<BBHH" + form, 1, code, to, by, *values)


def named(name: str, values: tuple[Any, ...], to: int | None = None) -> bytes:
    """A message's payload by its name, from its ordinary sender to its ordinary receiver."""
    _, code, form, _, _, _ = next(each for each in LAYOUTS if each[0] == name)
    from_module = code & 0x80
    if to is None:
        to = CONSOLE if from_module else (EVERYONE if name in _TO_EVERYONE else BIRCH)
    return payload(code, form, values, to, BIRCH if from_module else CONSOLE)


def vector(name: str, rule: str, kind: str, origin: str, **more: Any) -> Vector:
    """One entry. ``origin``: standard, or by hand, with how."""
    return {"id": name, "rule": rule, "kind": kind, "origin": origin, **more}


ACCEPTED, REFUSED, FINISHED, CUT, UNKNOWN = 1, 2, 3, 4, 5
"""Answer states."""


def answer(number: int, state: int, reason: int = 0, **other: int) -> str:
    """An Answer to a command of this epoch and boot, or of another."""
    epoch, boot = other.get("epoch", EPOCH), other.get("boot", BOOT)
    return named("Answer", (epoch, boot, number, state, reason, 0)).hex()


def flash(number: int, **other: int) -> str:
    """A Flash of this epoch, boot and identity, or of another."""
    epoch, boot = other.get("epoch", EPOCH), other.get("boot", BOOT)
    return named("Flash", (epoch, boot, number, other.get("bits", BITS), 2000)).hex()


def query(number: int, **other: int) -> str:
    """A Query."""
    epoch, boot = other.get("epoch", EPOCH), other.get("boot", BOOT)
    return named("Query", (epoch, boot, number)).hex()
