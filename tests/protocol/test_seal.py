"""The seal: tags against published cases, and everything that must not open."""

import hmac

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.errors import LocalProtocolError
from protocol.frame import MAX_PAYLOAD_BYTES, FrameDecoder, frame
from protocol.message import (
    MAX_BODY_BYTES,
    Nameplate,
    Packet,
    Query,
    Stop,
    decode,
    encode,
)
from protocol.seal import (
    KEY_BYTES,
    MAX_COUNT,
    SEAL_BYTES,
    KeyRing,
    Opened,
    Refused,
    Sealer,
    SealFault,
    open_seal,
    tag,
)

OLD, NEW = bytes(range(32)), bytes(range(32, 64))
STOP = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Stop(3)))

# RFC 4231 sections 4.2 to 4.8. The first is looked up; the others are from memory, and agree with
# the standard library's hmac. Case 5 is published cut to 128 bits.
RFC_4231 = [
    (b"\x0b" * 20, b"Hi There", "b0344c61d8db38535ca8afceaf0bf12b"),
    (b"Jefe", b"what do ya want for nothing?", "5bdcc146bf60754e6a042426089575c7"),
    (b"\xaa" * 20, b"\xdd" * 50, "773ea91e36800e46854db8ebd09181a7"),
    (bytes(range(1, 26)), b"\xcd" * 50, "82558a389a443c0ea4cc819899f2083a"),
    (b"\x0c" * 20, b"Test With Truncation", "a3b6167473100ee06e0c796c2955552b"),
    (
        b"\xaa" * 131,
        b"Test Using Larger Than Block-Size Key - Hash Key First",
        "60e431591ee0b67f0d8a26aacbf5b77f",
    ),
    (
        b"\xaa" * 131,
        b"This is a test using a larger than block-size key and a larger than block-size data. "
        b"The key needs to be hashed before being used by the HMAC algorithm.",
        "9b09ffa71b942fcb27635fbcd5b0e944",
    ),
]


@pytest.mark.parametrize(("key", "data", "published"), RFC_4231)
def test_tags_are_the_first_eight_bytes_of_the_published_ones(
    key: bytes, data: bytes, published: str
) -> None:
    assert tag(key, data) == bytes.fromhex(published)[:8]


def ring(*slots: int, under: int = 0) -> KeyRing:
    keys = {0: OLD, 1: NEW}
    return KeyRing({slot: keys[slot] for slot in slots or (0,)}, under)


def sealed(payload: bytes = STOP, opening: int = 9) -> bytes:
    return Sealer(ring(), opening).seal(payload)


def test_the_layout_by_hand() -> None:
    seal = sealed()
    # version 1, slot 0, sealed: 0x81; then the payload as it was; opening 9, count 1; the tag
    assert seal[:1] == b"\x81"
    assert seal[1 : len(STOP)] == STOP[1:]
    assert seal[len(STOP) : len(STOP) + 8] == bytes((1, 0, 0, 0, 9, 0, 0, 0))
    assert seal[-8:] == hmac.new(OLD, seal[:-8], "sha256").digest()[:8]
    assert len(seal) == len(STOP) + SEAL_BYTES


def test_what_was_sealed_opens_as_it_was() -> None:
    opened = open_seal(ring(), sealed())
    assert opened == Opened(STOP, CONSOLE_ADDRESS, 9 << 32 | 1)
    assert isinstance(opened, Opened)
    assert decode(opened.payload).message == Stop(3)


def test_the_longest_message_fits_a_frame_with_its_seal() -> None:
    payload = encode(Packet(1, 2, Nameplate(1, 9000, 1, b"m" * 12, b"k" * 12)))
    assert len(payload) == 6 + MAX_BODY_BYTES
    seal = sealed(payload)
    assert len(seal) == MAX_PAYLOAD_BYTES
    assert FrameDecoder().feed(frame(seal)) == [seal]


@given(st.integers(0, 10**9), st.data())
def test_no_bit_may_be_turned_over(stop_number: int, data: st.DataObject) -> None:
    payload = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Stop(stop_number % (1 << 32))))
    seal = bytearray(sealed(payload))
    bit = data.draw(st.integers(0, len(seal) * 8 - 1))
    seal[bit // 8] ^= 1 << bit % 8
    assert isinstance(open_seal(ring(), bytes(seal)), Refused)


@pytest.mark.parametrize(
    ("payload", "fault"),
    [
        (STOP, SealFault.UNSEALED),
        (b"", SealFault.UNSEALED),
        (b"\x81" + bytes(20), SealFault.TOO_SHORT),
        (sealed()[:21], SealFault.TOO_SHORT),
        (sealed()[:-1], SealFault.FORGED),
        (sealed() + b"\0", SealFault.FORGED),
        (Sealer(ring(0, 1, under=1), 9).seal(STOP), SealFault.UNKNOWN_SLOT),
        (Sealer(KeyRing({0: NEW}, 0), 9).seal(STOP), SealFault.FORGED),
    ],
)
def test_what_does_not_open(payload: bytes, fault: SealFault) -> None:
    assert open_seal(ring(0), payload) == Refused(fault)


def test_a_sealed_payload_is_no_message_before_it_is_opened() -> None:
    from protocol.errors import RemoteProtocolError

    with pytest.raises(RemoteProtocolError, match="sealed"):
        decode(sealed())


def test_counters_rise_and_a_new_opening_is_above_all_before() -> None:
    first, second = Sealer(ring(), 9), Sealer(ring(), 10)
    counters = []
    for sealer in (first, first, second):
        opened = open_seal(ring(), sealer.seal(STOP))
        assert isinstance(opened, Opened)
        counters.append(opened.counter)
    assert counters == sorted(set(counters))


def test_counters_are_never_used_twice_but_used_up(monkeypatch: pytest.MonkeyPatch) -> None:
    sealer = Sealer(ring(), 9)
    monkeypatch.setattr("protocol.seal.MAX_COUNT", 2)
    sealer.seal(STOP)
    sealer.seal(STOP)
    with pytest.raises(LocalProtocolError, match="used up"):
        sealer.seal(STOP)
    assert MAX_COUNT == (1 << 32) - 1


@pytest.mark.parametrize("opening", [0, -1, 1 << 32])
def test_an_opening_is_a_number_of_32_bits(opening: int) -> None:
    with pytest.raises(LocalProtocolError, match="opening"):
        Sealer(ring(), opening)


@pytest.mark.parametrize("payload", [b"", STOP[:5], bytes((0x02,)) + STOP[1:], STOP + bytes(40)])
def test_what_cannot_be_sealed(payload: bytes) -> None:
    with pytest.raises(LocalProtocolError):
        Sealer(ring(), 9).seal(payload)
    with pytest.raises(LocalProtocolError):
        Sealer(ring(), 9).seal(sealed())


# -- keys -------------------------------------------------------------------------------------


def test_a_key_is_changed_without_a_gap() -> None:
    console, module = ring(0), ring(0)
    for end in (console, module):
        end.put(1, NEW)
    console.send_under(1)
    assert isinstance(open_seal(module, Sealer(console, 9).seal(STOP)), Opened)
    assert isinstance(open_seal(console, Sealer(module, 9).seal(STOP)), Opened)  # still the old
    module.send_under(1)
    for end in (console, module):
        end.drop(0)
    assert isinstance(open_seal(console, Sealer(module, 10).seal(STOP)), Opened)
    assert open_seal(module, sealed()) == Refused(SealFault.UNKNOWN_SLOT)


def test_keys_are_checked_and_never_shown() -> None:
    with pytest.raises(LocalProtocolError, match="32 bytes") as caught:
        KeyRing({0: b"secret"}, 0)
    assert "secret" not in str(caught.value)
    with pytest.raises(LocalProtocolError, match="slot"):
        KeyRing({8: OLD}, 8)
    with pytest.raises(LocalProtocolError, match="no key is set"):
        KeyRing({0: OLD}, 1)
    with pytest.raises(LocalProtocolError, match="switch first"):
        ring(0).drop(0)
    shown = repr(ring(0, 1))
    assert OLD.hex() not in shown
    assert repr(OLD) not in shown
    assert len(OLD) == KEY_BYTES


def test_query_is_sealed_like_any_other() -> None:
    payload = encode(Packet(0x10, CONSOLE_ADDRESS, Query(1, 2, 3)))
    opened = open_seal(ring(), sealed(payload))
    assert isinstance(opened, Opened)
    assert opened.payload == payload
