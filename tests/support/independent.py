"""Check, stuffing and seal once more, written from their definitions and nothing of the project.

CRC-32C bit by bit from its polynomial (RFC 3720 section 12.1); COBS from the description in
Cheshire and Baker 1999; HMAC from the standard library. Slow, and plain enough to check by eye.
"""

import hmac


def crc32c(data: bytes) -> int:
    """CRC-32C: polynomial 0x1EDC6F41, reflected 0x82F63B78; all ones before and after."""
    value = 0xFFFFFFFF
    for byte in data:
        value ^= byte
        for _ in range(8):
            value = value >> 1 ^ (0x82F63B78 if value & 1 else 0)
    return value ^ 0xFFFFFFFF


def stuff(data: bytes) -> bytes:
    """COBS of fewer than 254 bytes: each zero byte, and the end, is replaced by the distance to
    it from the last one."""
    if len(data) >= 254:
        raise ValueError("longer runs are not needed here")
    out = bytearray()
    for run in data.split(b"\0"):
        out += bytes((len(run) + 1,)) + run
    return bytes(out)


def framed(payload: bytes) -> bytes:
    """Payload, check low byte first, stuffed, delimiter."""
    return stuff(payload + crc32c(payload).to_bytes(4, "little")) + b"\0"


def sealed(payload: bytes, key: bytes, slot: int, opening: int, count: int) -> bytes:
    """The seal as WIRE.md has it."""
    counter = count.to_bytes(4, "little") + opening.to_bytes(4, "little")
    covered = bytes((0x01 | slot << 4 | 0x80,)) + payload[1:] + counter
    return covered + hmac.new(key, covered, "sha256").digest()[:8]
