"""`decode_vs_floor`: the decoder and typed messages against the same by hand.

Unit: frames a second. The floor does what any reader must (split at the delimiter, COBS, check,
fields) in one loop, with no resynchronisation, no reasons for drops and no types.
"""

import struct
from collections.abc import Callable

from cobs import cobs
from crcmod.predefined import mkCrcFun

from protocol.frame import FrameDecoder
from protocol.message import decode
from tests.bench.measure import Figure, rate_ratio
from tests.bench.stream import Stream, make_stream

FRAMES = 20_000
ROUNDS = 9
FIELDS = struct.Struct("<BBHHIHIBBBhHhhH")  # header and telemetry body, from WIRE.md by hand
CHECK = struct.Struct("<I")


def by_hand(stream: Stream) -> Callable[[], int]:
    """The floor's loop."""
    crc: Callable[[bytes], int] = mkCrcFun("crc-32c")

    def loop() -> int:
        good = 0
        for piece in stream.telemetry.split(b"\0"):
            if piece:
                raw = cobs.decode(piece)
                payload = raw[:-4]
                (check,) = CHECK.unpack_from(raw, len(payload))
                if crc(payload) == check:
                    FIELDS.unpack_from(payload)
                    good += 1
        return good

    return loop


def ours(stream: Stream) -> Callable[[], int]:
    """The protocol's own loop, fed in chunks as reads return them."""
    chunks = stream.chunks()

    def loop() -> int:
        decoder = FrameDecoder()
        good = 0
        for chunk in chunks:
            for piece in decoder.feed(chunk):
                if type(piece) is bytes:
                    decode(piece)
                    good += 1
        return good

    return loop


def decode_vs_floor() -> Figure:
    """Measure. Both loops must have read every frame."""
    stream = make_stream(200, FRAMES)
    for loop in (ours(stream), by_hand(stream)):
        if (read := loop()) != FRAMES:
            raise RuntimeError(f"a loop read {read} of {FRAMES} frames")
    return rate_ratio(ours(stream), by_hand(stream), ROUNDS)
