"""`sealed_decode_vs_floor`: sealed frames through decoder, gate and typed messages, against a hand
loop that also runs the hash.

Unit: frames a second. The floor splits, unstuffs, checks, hashes, compares and unpacks in one
loop; it keeps no window, knows one key, and gives no reasons.
"""

import hmac
import struct
from collections.abc import Callable

from cobs import cobs
from crcmod.predefined import mkCrcFun

from protocol.codes import CONSOLE_ADDRESS, FIRST_MODULE_ADDRESS
from protocol.frame import FrameDecoder, frame
from protocol.message import Packet, Presence, Telemetry, encode
from protocol.seal import KeyRing, Sealer
from protocol.seal_gate import ConsoleGate
from tests.bench.decoding import CHECK, FIELDS
from tests.bench.measure import Figure, rate_ratio
from tests.bench.stream import CHUNK_BYTES, EPOCH

FRAMES = 20_000
ROUNDS = 9
KEY = bytes(range(32))
COUNTER = struct.Struct("<Q")


def sealed_stream() -> tuple[bytes, bytes]:
    """A presence that opens the window, and the telemetry behind it."""
    sealer = Sealer(KeyRing({0: KEY}, 0), 5)

    def framed(message: Presence | Telemetry) -> bytes:
        payload = encode(Packet(CONSOLE_ADDRESS, FIRST_MODULE_ADDRESS, message))
        return frame(sealer.seal(payload))

    first = framed(Presence(9, 5, EPOCH, 0, 0, 0, 0, 0, 1))
    rest = [
        framed(Telemetry(5, count & 0xFFFF, count, 2, 0, 1, 3000, 4100, 2300, 1, 9))
        for count in range(FRAMES)
    ]
    return first, b"".join(rest)


def by_hand(data: bytes) -> Callable[[], int]:
    """The floor's loop."""
    crc: Callable[[bytes], int] = mkCrcFun("crc-32c")

    def loop() -> int:
        good = newest = 0
        for piece in data.split(b"\0"):
            if not piece:
                continue
            raw = cobs.decode(piece)
            payload = raw[:-4]
            (check,) = CHECK.unpack_from(raw, len(payload))
            if crc(payload) != check:
                continue
            digest = hmac.digest(KEY, payload[:-8], "sha256")[:8]
            (counter,) = COUNTER.unpack_from(payload, len(payload) - 16)
            if hmac.compare_digest(digest, payload[-8:]) and counter > newest:
                newest = counter
                FIELDS.unpack_from(payload)
                good += 1
        return good

    return loop


def ours(first: bytes, data: bytes) -> Callable[[], int]:
    """The project's way, fed in chunks as reads return them."""
    chunks = [data[at : at + CHUNK_BYTES] for at in range(0, len(data), CHUNK_BYTES)]

    def loop() -> int:
        decoder, gate = FrameDecoder(), ConsoleGate(KeyRing({0: KEY}, 0), EPOCH)
        good = -1  # the presence is not counted
        for chunk in [first, *chunks]:
            for piece in decoder.feed(chunk):
                if type(piece) is bytes:
                    good += type(gate.admit(piece)) is Packet
        return good

    return loop


def sealed_decode_vs_floor() -> Figure:
    """Measure. Both loops must have read every frame."""
    first, data = sealed_stream()
    for loop in (ours(first, data), by_hand(data)):
        if (read := loop()) != FRAMES:
            raise RuntimeError(f"a loop read {read} of {FRAMES} frames")
    return rate_ratio(ours(first, data), by_hand(data), ROUNDS)
