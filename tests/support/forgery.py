"""Forged, altered, cut, replayed and re-ordered sealed frames, against two honest senders: two
modules that speak to a console, or two consoles that speak to a module which follows one of them.

The forger has heard everything that was sent, knows the format, and lacks the key.
"""

import random
from dataclasses import dataclass

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.message import Message, Packet, Permit, Presence, Query, Telemetry, encode
from protocol.replay_window import WINDOW
from protocol.seal import SEAL_BYTES, KeyRing, Sealer
from protocol.seal_gate import ConsoleGate, ModuleGate

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


BOOT = 5
OTHER_EPOCH = EPOCH + 5


def assault(seed: int, frames: int) -> Assault:
    """Offer so many forgeries, half to a console's gate and half to a module's, with honest frames
    in disorder between."""
    rng, result = random.Random(seed), Assault()
    _assault_console(rng, frames // 2, result)
    _assault_module(rng, frames, result)
    return result


def _assault_console(rng: random.Random, until: int, result: Assault) -> None:
    gate = ConsoleGate(KeyRing({0: KEY}, 0), EPOCH)
    sealers = {source: Sealer(KeyRing({0: KEY}, 0), 7 + source) for source in SENDERS}
    heard: list[bytes] = []
    for source in SENDERS:
        presence = Presence(source, 5, EPOCH, 7, 0, 0, 0, 0, 1)
        heard.append(sealers[source].seal(_payload(source, presence)))
        assert isinstance(gate.admit(heard[-1]), Packet)
    count = 0
    while result.forged < until:
        honest = []
        for _ in range(WINDOW // 4):
            count += 1
            source = rng.choice(SENDERS)
            honest.append(sealers[source].seal(_payload(source, _telemetry(count))))
        _offer(rng, gate, honest, heard, result)


def _assault_module(rng: random.Random, until: int, result: Assault) -> None:
    """The other console is honest too, but not followed: what it says of permits is not obeyed,
    and must not move the window of the one that is."""
    gate = ModuleGate(KeyRing({0: KEY}, 0), BOOT)
    gate.follow(EPOCH)
    followed, other = (Sealer(KeyRing({0: KEY}, 0), epoch) for epoch in (EPOCH, OTHER_EPOCH))
    proof = followed.seal(_said(Query(EPOCH, BOOT, 0)))
    assert isinstance(gate.admit(proof), Packet)
    heard, count = [proof], 0
    while result.forged < until:
        honest = []
        for _ in range(WINDOW // 4):
            count += 1
            honest.append(followed.seal(_said(Permit(9, count))))
            strange = other.seal(_said(Permit(10, count)))
            result.forged += 1
            result.forged_accepted += isinstance(gate.admit(strange), Packet)
            heard.append(strange)
        _offer(rng, gate, honest, heard, result)


def _said(message: Message) -> bytes:
    return encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, message))


def _offer(
    rng: random.Random,
    gate: ConsoleGate | ModuleGate,
    honest: list[bytes],
    heard: list[bytes],
    result: Assault,
) -> None:
    """Let honest frames come in disorder, and forgeries made of what was heard between them."""
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
