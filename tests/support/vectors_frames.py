"""Vectors of frames, checks, payloads and messages: bytes and what they hold."""

from tests.support.independent import crc32c, framed, sealed, stuff
from tests.support.wire_by_hand import KEY, LAYOUTS, Vector, named, payload, vector


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
