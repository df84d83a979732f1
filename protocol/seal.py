"""The seal: who sent a frame, that nobody changed it, and that it is not an old one again.

Owns keys in memory, tags and counters, as WIRE.md's section "Seal" has them: HMAC-SHA-256 (RFC
2104, RFC 6234) over header, body and counter, cut to 8 bytes. Payloads in, payloads out. Knows no
files, no links and no messages' meaning; which authentic frames may be obeyed is seal_gate.py's.

A key is nowhere in an error's text, nor in what ``repr`` shows.
"""

import hmac
import struct
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from protocol.codes import WIRE_VERSION
from protocol.errors import LocalProtocolError
from protocol.message import HEADER, MAX_BODY_BYTES

KEY_BYTES: Final = 32
"""The hash's own length: RFC 2104 section 3 advises no less."""
TAG_BYTES: Final = 8
COUNTER: Final = struct.Struct("<Q")
SEAL_BYTES: Final = COUNTER.size + TAG_BYTES
SLOTS: Final = 8
SEALED_BIT: Final = 0x80
OPENING_SHIFT: Final = 32
"""The upper half of a counter is the opening of its sender."""
MAX_OPENING: Final = (1 << 32) - 1
MAX_COUNT: Final = (1 << 32) - 1

_VERSION_MASK: Final = 0x0F
_SLOT_SHIFT: Final = 4
_SLOT_MASK: Final = 0x07
_LEAST_BYTES: Final = HEADER.size + SEAL_BYTES
_SOURCE: Final = struct.Struct("<H")
_SOURCE_AT: Final = 4


class KeyRing:
    """The keys that are taken, by slot, and the one under which is sent.

    A key is changed without a gap in three steps: ``put`` the new one at every end, ``send_under``
    it, ``drop`` the old one. Raises LocalProtocolError for a slot that is none, a key of another
    length, or a sending slot without a key.
    """

    def __init__(self, keys: Mapping[int, bytes], sending_slot: int) -> None:
        self._keys: dict[int, bytes] = {}
        for slot, key in keys.items():
            self.put(slot, key)
        self._sending_slot = -1
        self.send_under(sending_slot)

    def __repr__(self) -> str:
        return f"KeyRing(slots {sorted(self._keys)}, sending under {self._sending_slot})"

    @property
    def sending_slot(self) -> int:
        """The slot under whose key frames are sealed."""
        return self._sending_slot

    def put(self, slot: int, key: bytes) -> None:
        """Take a key under a slot; an earlier one there is no longer taken."""
        if not 0 <= slot < SLOTS:
            raise LocalProtocolError(f"a key's slot is 0 to {SLOTS - 1}, not {slot}")
        if len(key) != KEY_BYTES:
            raise LocalProtocolError(f"a key has {KEY_BYTES} bytes, this one {len(key)}")
        self._keys[slot] = bytes(key)

    def send_under(self, slot: int) -> None:
        """Seal under this slot's key from now on."""
        if slot not in self._keys:
            raise LocalProtocolError(f"no key is set for slot {slot}")
        self._sending_slot = slot

    def drop(self, slot: int) -> None:
        """Take nothing under this slot any more."""
        if slot == self._sending_slot:
            raise LocalProtocolError(f"slot {slot} is still sent under; switch first")
        self._keys.pop(slot, None)

    def key(self, slot: int) -> bytes | None:
        """The key of a slot, or None."""
        return self._keys.get(slot)


class Sealer:
    """Seals what one sender sends. ``opening`` must be greater than any this sender ever used
    with any of the keys: so no counter is used twice, over restarts too.

    Raises LocalProtocolError for an opening that is not 1 to 2^32 - 1.
    """

    def __init__(self, keys: KeyRing, opening: int) -> None:
        if not 0 < opening <= MAX_OPENING:
            raise LocalProtocolError(f"an opening is 1 to {MAX_OPENING}, not {opening}")
        self._keys = keys
        self._opening = opening
        self._count = 0

    def seal(self, payload: bytes) -> bytes:
        """Seal one payload (header and body).

        Raises LocalProtocolError where it is no payload, is sealed already, leaves no room, or
        the opening's counters are used up.
        """
        if not HEADER.size <= len(payload) <= HEADER.size + MAX_BODY_BYTES:
            raise LocalProtocolError(f"{len(payload)} bytes are no payload that can be sealed")
        if payload[0] != WIRE_VERSION:
            raise LocalProtocolError("only an unsealed payload of this wire version can be sealed")
        if self._count >= MAX_COUNT:
            raise LocalProtocolError("the counters of this opening are used up; open anew")
        self._count += 1
        slot = self._keys.sending_slot
        counter = COUNTER.pack(self._opening << OPENING_SHIFT | self._count)
        first = bytes((WIRE_VERSION | slot << _SLOT_SHIFT | SEALED_BIT,))
        covered = first + payload[1:] + counter
        return covered + tag(self._keys.key(slot) or b"", covered)


class SealFault(StrEnum):
    """Why a frame was not obeyed."""

    UNSEALED = "unsealed"
    TOO_SHORT = "too short for a seal"
    UNKNOWN_SLOT = "no key for its slot"
    FORGED = "forged or altered"
    REPEATED = "repeated"
    TOO_OLD = "too old"
    NOT_FRESH = "not fresh"
    OTHER_OPENING = "of another console"


@dataclass(frozen=True, slots=True)
class Opened:
    """An authentic payload, in its unsealed form; nothing is said yet of its being new."""

    payload: bytes
    source: int
    counter: int


@dataclass(frozen=True, slots=True)
class Refused:
    """A payload that was not obeyed, and why."""

    fault: SealFault


def tag(key: bytes, covered: bytes) -> bytes:
    """The tag over what it covers: the first 8 bytes of HMAC-SHA-256.

    Shorter than the half of the hash that RFC 2104 section 5 advises: WIRE.md says why.
    """
    return hmac.digest(key, covered, "sha256")[:TAG_BYTES]


def unsealed_form(payload: bytes) -> bytes:
    """Take a seal off without checking it: for reading a record of what was checked before.

    A payload without a seal, or too short for one, is returned as it is.
    """
    if len(payload) < _LEAST_BYTES or not payload[0] & SEALED_BIT:
        return payload
    return bytes((payload[0] & _VERSION_MASK,)) + payload[1:-SEAL_BYTES]


def open_seal(keys: KeyRing, payload: bytes) -> Opened | Refused:
    """Check the seal of one payload. Comparing takes the same time wherever a tag differs."""
    first = payload[0] if payload else 0
    if not first & SEALED_BIT:
        return Refused(SealFault.UNSEALED)
    if len(payload) < _LEAST_BYTES:
        return Refused(SealFault.TOO_SHORT)
    key = keys.key(first >> _SLOT_SHIFT & _SLOT_MASK)
    if key is None:
        return Refused(SealFault.UNKNOWN_SLOT)
    covered = payload[:-TAG_BYTES]
    if not hmac.compare_digest(tag(key, covered), payload[-TAG_BYTES:]):
        return Refused(SealFault.FORGED)
    (source,) = _SOURCE.unpack_from(payload, _SOURCE_AT)
    (counter,) = COUNTER.unpack_from(payload, len(payload) - SEAL_BYTES)
    return Opened(unsealed_form(payload), source, counter)
