"""Writes protocol/vectors.json: `python -m tests.support.make_vectors > protocol/vectors.json`.

Payloads are laid out here by hand from WIRE.md's tables, byte for byte, with ``struct`` alone;
check, stuffing and tags come from tests/support/independent.py. Nothing of protocol/ is imported,
so that an error there cannot agree with itself.
"""

import json
import struct
import sys
from typing import Any

from tests.support.independent import crc32c, framed, sealed, stuff

KEY = bytes(range(32))
EPOCH, BOOT, BITS = 1_700_000_000, 0x0A0B0C0D, 0x2211
IDENTITY = 0x8000_00AA_BBCC_2211
CONSOLE, BIRCH, EVERYONE = 0x0001, 0x0011, 0xFFFF

Vector = dict[str, Any]

# name, code, body format by hand, field names, ordinary values, extreme values
LAYOUTS: list[tuple[str, int, str, str, tuple[Any, ...], tuple[Any, ...]]] = [
    ("RollCall", 0x01, "I", "epoch", (EPOCH,), (0xFFFFFFFF,)),
    ("Query", 0x02, "IIH", "epoch boot number", (EPOCH, BOOT, 7), (0, 0, 65535)),
    (
        "Pivot",
        0x10,
        "IIHHBbH",
        "epoch boot number identity_bits setting direction speed_rpm",
        (EPOCH, BOOT, 7, BITS, 1, 1, 5200),
        (0xFFFFFFFF, 0xFFFFFFFF, 65535, 65535, 255, -128, 65535),
    ),
    (
        "Spin",
        0x11,
        "IIHHhH",
        "epoch boot number identity_bits speed_rpm hold_ms",
        (EPOCH, BOOT, 8, BITS, -3000, 5000),
        (0, 0, 1, 0, -32768, 65535),
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
    ("Stop", 0x20, "I", "stop_number", (3,), (0xFFFFFFFF,)),
    ("Clear", 0x21, "I", "stop_number", (3,), (0,)),
    (
        "Presence",
        0x81,
        "QIIIBBI",
        "identity boot epoch stop_number latched face_up time_ms",
        (IDENTITY, BOOT, EPOCH, 3, 1, 2, 12345),
        (2**64 - 1, 0, 0, 0, 255, 255, 2**32 - 1),
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
        "IIHBBBBhhHHIHHH",
        "epoch boot number reason face_before face_after settled turned_ddeg peak_tilt_ddeg"
        " peak_rate_dps wheel_at_brake_rpm brake_us spin_up_ms settle_ms sag_mV",
        (EPOCH, BOOT, 7, 0, 1, 2, 1, 900, 921, 700, 5205, 21_500, 790, 250, 560),
        (0, 0, 0, 255, 0, 0, 0, -32768, 32767, 65535, 65535, 2**32 - 1, 65535, 65535, 65535),
    ),
    (
        "Stopped",
        0x86,
        "IBBhIH",
        "stop_number latched activity wheel_rpm boot identity_bits",
        (3, 1, 3, 2500, BOOT, BITS),
        (0, 0, 0, -32768, 0, 0),
    ),
]


def payload(code: int, form: str, values: tuple[Any, ...], to: int, by: int) -> bytes:
    """Header and body, low byte first."""
    return struct.pack("<BBHH" + form, 1, code, to, by, *values)


def named(name: str, values: tuple[Any, ...]) -> bytes:
    """A message's payload by its name, from its ordinary sender to its ordinary receiver."""
    _, code, form, _, _, _ = next(each for each in LAYOUTS if each[0] == name)
    from_module = code & 0x80
    to = CONSOLE if from_module else (EVERYONE if name in ("RollCall", "Stop", "Clear") else BIRCH)
    return payload(code, form, values, to, BIRCH if from_module else CONSOLE)


def vector(name: str, rule: str, kind: str, origin: str, **more: Any) -> Vector:
    """One entry. ``origin``: standard, or by hand, with how."""
    return {"id": name, "rule": rule, "kind": kind, "origin": origin, **more}


def message_vectors() -> list[Vector]:
    """Every message, with ordinary and with extreme values."""
    found = []
    for name, code, form, fields, ordinary, extreme in LAYOUTS:
        for which, values in (("ordinary", ordinary), ("extreme", extreme)):
            shown = [v.hex() if isinstance(v, bytes) else v for v in values]
            laid_out = payload(code, form, values, 0x1234, 0xFEDC)
            found.append(
                vector(
                    f"message-{name}-{which}",
                    f"{name} `0x{code:02x}`",
                    "message",
                    "by hand: laid out from the table",
                    payload=laid_out.hex(),
                    frame=framed(laid_out).hex(),
                    message=name,
                    destination=0x1234,
                    source=0xFEDC,
                    fields=dict(zip(fields.split(), shown, strict=True)),
                )
            )
    return found


def frame_vectors() -> list[Vector]:
    """Bytes in, pieces out."""
    stop = named("Stop", (3,))
    good = framed(stop)
    body = stop + crc32c(stop).to_bytes(4, "little")
    flipped = bytes((good[0], good[1] ^ 4)) + good[2:]
    long_payload = stop + bytes(60)
    ok = {"payload": stop.hex()}
    rows = [
        ("good", good, [ok]),
        ("two", good + good, [ok, ok]),
        ("empty-between", b"\0\0" + good + b"\0" + good, [ok, ok]),
        ("joined-mid-stream", good[5:] + good, [{"dropped": "check failed"}, ok]),
        ("damaged", flipped + good, [{"dropped": "check failed"}, ok]),
        # The stuffed Stop begins 06 01 20 ff ff 01 02 03 01: runs end after bytes 6, 8 and 9.
        ("truncated-in-a-run", good[:4] + b"\0" + good, [{"dropped": "bad stuffing"}, ok]),
        ("truncated-behind-a-run", good[:9] + b"\0" + good, [{"dropped": "check failed"}, ok]),
        ("bad-stuffing", b"\x09\x01\0" + good, [{"dropped": "bad stuffing"}, ok]),
        ("only-a-check", stuff(body[-4:]) + b"\0" + good, [{"dropped": "too short"}, ok]),
        ("oversized", framed(long_payload) + good, [{"dropped": "too long"}, ok]),
        ("endless", bytes(range(1, 256)) * 3 + b"\0" + good, [{"dropped": "too long"}, ok]),
        ("unfinished", good[:-1], []),
    ]
    origin = "by hand: CRC bit by bit, COBS from the paper"
    found = [
        vector(f"frame-{name}", "Frames", "frame", origin, bytes=data.hex(), pieces=pieces)
        for name, data, pieces in rows
    ]
    return found + [
        vector(f"check-{name}", "Frames", "check", source, data=data.hex(), crc32c=f"{value:08x}")
        for name, data, value, source in STANDARD_CHECKS
    ]


# RFC 3720 Appendix B.4, and the catalogue's check value; looked up.
STANDARD_CHECKS = [
    ("zeros", bytes(32), 0x8A9136AA, "standard: RFC 3720 B.4, 32 bytes of zeroes"),
    ("ones", b"\xff" * 32, 0x62A8AB43, "standard: RFC 3720 B.4, 32 bytes of ones"),
    ("rising", bytes(range(32)), 0x46DD794E, "standard: RFC 3720 B.4, 0 to 31"),
    ("catalogue", b"123456789", 0xE3069283, "standard: CRC catalogue, CRC-32/ISCSI"),
]


def payload_vectors() -> list[Vector]:
    """Payloads with a good check that are no message."""
    stop = named("Stop", (3,))
    rows = [
        ("other-version", bytes((2,)) + stop[1:]),
        ("unknown-code", stop[:1] + b"\x7f" + stop[2:]),
        ("one-byte-short", stop[:-1]),
        ("one-byte-long", stop + b"\0"),
        ("no-header", stop[:5]),
        ("sealed", sealed(stop, KEY, 0, 9, 1)),
    ]
    return [
        vector(f"payload-{name}", "Payload", "no message", "by hand", payload=data.hex())
        for name, data in rows
    ]


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


def memory_vectors() -> list[Vector]:
    """The command memory, line by line of its list. A fresh command here is finished at once, and
    Answer FINISHED remembered."""
    call = named("RollCall", (EPOCH,)).hex()
    later = named("RollCall", (EPOCH + 1,)).hex()
    done, refused, unknown = 3, 2, 5
    scripts: list[tuple[str, list[list[Any]]]] = [
        ("fresh", [[call, None], [flash(1), "fresh", answer(1, done)]]),
        (
            "repeat",
            [[call, None], [flash(1), "fresh", answer(1, done)], [flash(1), answer(1, done)]],
        ),
        ("other-identity", [[call, None], [flash(1, bits=0x9999), answer(1, refused, 3)]]),
        ("other-boot", [[call, None], [flash(1, boot=5), answer(1, refused, 1, boot=5)]]),
        ("other-epoch", [[call, None], [flash(1, epoch=5), answer(1, refused, 2, epoch=5)]]),
        ("before-any-epoch", [[flash(1), answer(1, refused, 2)]]),
        ("number-zero", [[call, None], [flash(0), answer(0, refused, 14)]]),
        (
            "passed",
            [
                [call, None],
                [flash(5), "fresh", answer(5, done)],
                [flash(4), answer(4, refused, 4)],
            ],
        ),
        (
            "wraps",
            [
                [call, None],
                [flash(65535), "fresh", answer(65535, done)],
                [flash(1), "fresh", answer(1, done)],
                [flash(65535), answer(65535, done)],
                [flash(65534), answer(65534, refused, 4)],
            ],
        ),
        (
            "half-the-space-is-not-newer",
            [
                [call, None],
                [flash(1), "fresh", answer(1, done)],
                [flash(32769), answer(32769, refused, 4)],
                [flash(32768), "fresh", answer(32768, done)],
            ],
        ),
        (
            "a-new-epoch-empties-it",
            [
                [call, None],
                [flash(5), "fresh", answer(5, done)],
                [later, None],
                [flash(5), answer(5, refused, 2)],
                [flash(1, epoch=EPOCH + 1), "fresh", answer(1, done, epoch=EPOCH + 1)],
                [call, None],
                [flash(2, epoch=EPOCH + 1), "fresh", answer(2, done, epoch=EPOCH + 1)],
            ],
        ),
        (
            "query",
            [
                [call, None],
                [flash(1), "fresh", answer(1, done)],
                [query(1), answer(1, done)],
                [query(1, boot=5), answer(1, unknown, 1, boot=5)],
                [query(1, epoch=5), answer(1, unknown, 2, epoch=5)],
            ],
        ),
        (
            "a-query-closes-its-number",
            [
                [call, None],
                [query(3), answer(3, unknown)],
                [flash(3), answer(3, refused, 4)],
                [flash(4), "fresh", answer(4, done)],
            ],
        ),
        (
            "forgotten-is-refused",
            [
                [call, None],
                *([flash(n), "fresh", answer(n, done)] for n in range(1, 18)),
                [flash(1), answer(1, refused, 4)],
                [flash(2), answer(2, done)],
            ],
        ),
    ]
    return [
        vector(
            f"memory-{name}",
            "The module: at most once",
            "memory",
            "by hand: from the list",
            identity_bits=BITS,
            boot=BOOT,
            steps=[{"in": step[0], "fresh": step[1] == "fresh", "out": step[-1]} for step in steps],
        )
        for name, steps in scripts
    ]


def stop_vectors() -> list[Vector]:
    """All-stop and clear at a module: the newest number it knows, and its latch, after each."""

    def stop(number: int) -> str:
        return named("Stop", (number,)).hex()

    def clear(number: int) -> str:
        return named("Clear", (number,)).hex()

    scripts = [
        ("stop-and-clear", [(stop(3), 3, 1), (clear(3), 3, 0)]),
        ("repeated", [(stop(3), 3, 1), (stop(3), 3, 1)]),
        (
            "older-stop-is-obeyed-and-newest-kept",
            [(stop(5), 5, 1), (clear(5), 5, 0), (stop(2), 5, 1)],
        ),
        (
            "clear-of-an-older-one",
            [(stop(3), 3, 1), (stop(4), 4, 1), (clear(3), 4, 1), (clear(4), 4, 0)],
        ),
        ("clear-of-a-newer-one", [(stop(3), 3, 1), (clear(9), 3, 1)]),
    ]
    return [
        vector(
            f"stop-{name}",
            "All-stop",
            "stop",
            "by hand: from the rule",
            steps=[{"in": s, "stop_number": n, "latched": latched} for s, n, latched in steps],
        )
        for name, steps in scripts
    ]


def seal_vectors() -> list[Vector]:
    """Sealing, opening, and what a gate obeys."""
    stop, ask = named("Stop", (3,)), bytes.fromhex(query(0))
    clear = named("Clear", (3,))
    good = sealed(stop, KEY, 0, 9, 1)
    counter_up = good[:-16] + bytes((good[-16] + 1,)) + good[-15:]
    origin = "by hand: HMAC from the standard library"
    rows = [
        ("honest", good, "opened"),
        ("other-key", sealed(stop, bytes(32), 0, 9, 1), "forged or altered"),
        ("altered-body", good[:7] + bytes((good[7] ^ 1,)) + good[8:], "forged or altered"),
        ("altered-counter", counter_up, "forged or altered"),
        ("truncated", good[:-1], "forged or altered"),
        ("too-short", good[:20], "too short for a seal"),
        ("other-slot", sealed(stop, KEY, 3, 9, 1), "no key for its slot"),
        ("unsealed", stop, "unsealed"),
    ]
    found = [
        vector(f"seal-{name}", "Seal", "open", origin, payload=data.hex(), verdict=verdict)
        for name, data, verdict in rows
    ]
    found.append(
        vector(
            "seal-layout",
            "Seal",
            "seal",
            origin,
            payload=stop.hex(),
            opening=9,
            sealed=[good.hex(), sealed(stop, KEY, 0, 9, 2).hex()],
        )
    )

    def at(count: int, plain: bytes, opening: int = 9) -> str:
        return sealed(plain, KEY, 0, opening, count).hex()

    obeyed, old = "obeyed", "too old"
    scripts = [
        (
            "before-proof",
            [
                (at(1, stop), obeyed),
                (at(2, clear), "not fresh"),
                (at(3, ask), obeyed),
                (at(4, clear), obeyed),
            ],
        ),
        ("older-than-the-proof", [(at(9, ask), obeyed), (at(8, clear), "repeated")]),
        (
            "repeated-clear",
            [(at(1, ask), obeyed), (at(2, clear), obeyed), (at(2, clear), "repeated")],
        ),
        ("repeated-stop", [(at(1, ask), obeyed), (at(2, stop), obeyed), (at(2, stop), obeyed)]),
        (
            "late-within-the-window",
            [
                (at(1, ask), obeyed),
                (at(65, clear), obeyed),
                (at(2, clear), obeyed),
                (at(2, clear), "repeated"),
            ],
        ),
        (
            "left-of-the-window",
            [(at(1, ask), obeyed), (at(66, clear), obeyed), (at(2, clear), old)],
        ),
        ("a-new-opening", [(at(1, ask), obeyed), (at(1, clear, 10), obeyed), (at(2, clear), old)]),
    ]
    return found + [
        vector(
            f"gate-{name}",
            "Seal",
            "gate",
            origin,
            boot=BOOT,
            steps=[{"in": data, "verdict": verdict} for data, verdict in steps],
        )
        for name, steps in scripts
    ]


FORMAT = {
    "check": "crc32c of data, as a number in hexadecimal",
    "frame": "bytes fed to a fresh decoder give these pieces, each a payload or a reason of drop",
    "message": "payload decodes to the named message with these fields (text fields in"
    " hexadecimal, without padding), and encodes from them; frame is its frame",
    "no message": "a payload whose check is good, and that must be dropped",
    "memory": "a fresh command memory of this boot and identity; each step is a payload that comes"
    " in, whether it is fresh, and the payload that goes out (null: nothing is looked at). What is"
    " fresh is finished at once: Answer FINISHED is remembered and goes out. 16 replies are kept",
    "stop": "a module that knows no stop; after each step, its newest number and its latch",
    "seal": "payload sealed under key, slot 0, with this opening: the first, then the second time",
    "open": "payload opened by a receiver that has key in slot 0 only",
    "gate": "a sealed module just started with this boot number hears these; what it does",
}


def main() -> None:
    """Print the document."""
    vectors = [
        *frame_vectors(),
        *payload_vectors(),
        *message_vectors(),
        *memory_vectors(),
        *stop_vectors(),
        *seal_vectors(),
    ]
    document = {"wire_version": 1, "key": KEY.hex(), "format": FORMAT, "vectors": vectors}
    json.dump(document, sys.stdout, indent=1)
    print()


if __name__ == "__main__":
    main()
