"""Mutated frames for the decoder: structured damage, from a seed, as fast as Python draws.

A corpus of every message, framed; then bits turned over, bytes put in and taken out, frames cut,
spliced, doubled, delimiters in the wrong place. ``random.Random`` and not keyed draws, since ten
million frames are drawn: a red run is had again on the same Python release only.
"""

import random
from collections.abc import Callable
from dataclasses import dataclass

from protocol.errors import RemoteProtocolError
from protocol.frame import MAX_STUFFED_BYTES, Dropped, FrameDecoder, frame
from protocol.message import LAYOUTS, MAX_BODY_BYTES, Packet, decode, encode

PIECES_A_CHUNK = 50


def corpus(rng: random.Random) -> list[bytes]:
    """One framed message of each kind, with random fields."""
    frames = []
    for layout in LAYOUTS.values():
        body = rng.randbytes(layout.body.size)
        message = layout.make(layout.body.unpack(body))
        frames.append(
            frame(encode(Packet(rng.randrange(0x10000), rng.randrange(0x10000), message)))
        )
    return frames


def _flip(rng: random.Random, data: bytearray, other: bytes) -> None:
    data[rng.randrange(len(data))] ^= 1 << rng.randrange(8)


def _put_in(rng: random.Random, data: bytearray, other: bytes) -> None:
    data[rng.randrange(len(data)) : 0] = rng.randbytes(rng.randrange(1, 8))


def _take_out(rng: random.Random, data: bytearray, other: bytes) -> None:
    at = rng.randrange(len(data))
    del data[at : at + rng.randrange(1, 8)]


def _splice(rng: random.Random, data: bytearray, other: bytes) -> None:
    data[rng.randrange(len(data)) :] = other[rng.randrange(len(other)) :]


def _delimit(rng: random.Random, data: bytearray, other: bytes) -> None:
    data[rng.randrange(len(data))] = 0


def _lengthen(rng: random.Random, data: bytearray, other: bytes) -> None:
    data[-1:-1] = rng.randbytes(rng.randrange(200))


def _leave(rng: random.Random, data: bytearray, other: bytes) -> None:
    """Now and then a frame is whole, or the decoder would be tried on rubbish only."""


MUTATIONS: tuple[Callable[[random.Random, bytearray, bytes], None], ...] = (
    _flip,
    _put_in,
    _take_out,
    _splice,
    _delimit,
    _lengthen,
    _leave,
)


@dataclass(slots=True)
class Found:
    """What a run over mutated frames came to."""

    offered: int = 0
    good: int = 0
    dropped: int = 0
    not_understood: int = 0
    most_held: int = 0


def run_mutations(seed: int, frames: int) -> Found:
    """Offer so many mutated frames. Any error but the documented one comes through.

    Raises RuntimeError where the decoder holds more than it may between two calls.
    """
    rng = random.Random(seed)
    seeds = corpus(rng)
    decoder = FrameDecoder()
    found = Found()
    while found.offered < frames:
        chunk = bytearray()
        for _ in range(PIECES_A_CHUNK):
            data = bytearray(rng.choice(seeds))
            rng.choice(MUTATIONS)(rng, data, rng.choice(seeds))
            chunk += data
        found.offered += PIECES_A_CHUNK
        _take(decoder, bytes(chunk), found)
    return found


def _take(decoder: FrameDecoder, chunk: bytes, found: Found) -> None:
    for piece in decoder.feed(chunk):
        if isinstance(piece, Dropped):
            found.dropped += 1
            continue
        try:
            decode(piece)
            found.good += 1
        except RemoteProtocolError:
            found.not_understood += 1
        if len(piece) > 6 + MAX_BODY_BYTES + 16:
            raise RuntimeError(f"a payload of {len(piece)} bytes came through")
    found.most_held = max(found.most_held, len(decoder._held))
    if found.most_held > MAX_STUFFED_BYTES + 1:
        raise RuntimeError(f"the decoder holds {found.most_held} bytes")
