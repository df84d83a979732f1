"""Forged, altered, cut, replayed and re-ordered sealed frames, against two honest senders.

The forger has heard everything that was sent, knows the format, and lacks the key.
"""

import random
from dataclasses import dataclass

from protocol.codes import CONSOLE_ADDRESS
from protocol.message import Message, Packet, Presence, Telemetry, encode
from protocol.replay_window import WINDOW
from protocol.seal import SEAL_BYTES, KeyRing, Sealer
from protocol.seal_gate import ConsoleGate

EPOCH = 1_700_000_000
SENDERS = (0x10, 0x11)
KEY = bytes(range(32))


@dataclass(slots=True)
class Assault:
    """What a run came to. ``forged_accepted`` and ``honest_refused`` must be 0."""

    forged: int = 0
    forged_accepted: int = 0
    honest: int = 0
    honest_refused: int = 0


def _payload(source: int, message: Message) -> bytes:
    return encode(Packet(CONSOLE_ADDRESS, source, message))


def _telemetry(count: int) -> Telemetry:
    return Telemetry(5, count & 0xFFFF, count, 0, 0, 1, 0, 4000, 2000, 0, 7)


def _altered(rng: random.Random, sealed: bytes) -> bytes:
    copy = bytearray(sealed)
    copy[rng.randrange(len(copy))] ^= 1 << rng.randrange(8)
    return bytes(copy)


def _cut(rng: random.Random, sealed: bytes) -> bytes:
    return sealed[: rng.randrange(len(sealed))]


def _made_up(rng: random.Random, sealed: bytes) -> bytes:
    return sealed[:-SEAL_BYTES] + rng.randbytes(SEAL_BYTES)


def _stripped(rng: random.Random, sealed: bytes) -> bytes:
    return bytes((sealed[0] & 0x0F,)) + sealed[1:-SEAL_BYTES]


def _newer_counter(rng: random.Random, sealed: bytes) -> bytes:
    counter = int.from_bytes(sealed[-16:-8], "little") + rng.randrange(1, 1000)
    return sealed[:-16] + counter.to_bytes(8, "little") + sealed[-8:]


def _other_slot(rng: random.Random, sealed: bytes) -> bytes:
    return bytes((sealed[0] ^ rng.randrange(1, 8) << 4,)) + sealed[1:]


def _as_it_was(rng: random.Random, sealed: bytes) -> bytes:
    """A replay."""
    return sealed


FORGERIES = (_altered, _cut, _made_up, _stripped, _newer_counter, _other_slot, _as_it_was)


def assault(seed: int, frames: int) -> Assault:
    """Offer so many forgeries to a console's gate, with honest frames in disorder between."""
    rng = random.Random(seed)
    gate = ConsoleGate(KeyRing({0: KEY}, 0), EPOCH)
    sealers = {source: Sealer(KeyRing({0: KEY}, 0), 7 + source) for source in SENDERS}
    result = Assault()
    heard: list[bytes] = []
    for source in SENDERS:
        presence = Presence(source, 5, EPOCH, 7, 0, 0, 0, 0, 1)
        heard.append(sealers[source].seal(_payload(source, presence)))
        assert isinstance(gate.admit(heard[-1]), Packet)
    count = 0
    while result.forged < frames:
        honest = []
        for _ in range(WINDOW // 4):
            count += 1
            source = rng.choice(SENDERS)
            honest.append(sealers[source].seal(_payload(source, _telemetry(count))))
        rng.shuffle(honest)
        for each in honest:
            result.honest += 1
            result.honest_refused += not isinstance(gate.admit(each), Packet)
            heard.append(each)
            for _ in range(4):
                result.forged += 1
                forged = rng.choice(FORGERIES)(rng, rng.choice(heard))
                result.forged_accepted += isinstance(gate.admit(forged), Packet)
        del heard[: max(0, len(heard) - 2000)]
    return result
