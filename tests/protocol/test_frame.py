"""Framing: published vectors of its two parts, then streams whole, in pieces and damaged."""

import random

import pytest
from cobs import cobs
from crcmod.predefined import mkCrcFun
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.errors import LocalProtocolError
from protocol.frame import (
    MAX_FRAME_BYTES,
    MAX_PAYLOAD_BYTES,
    Drop,
    Dropped,
    FrameDecoder,
    frame,
)

STEADY = settings(derandomize=True, deadline=None)
"""The same examples each time, and no deadline on a busy machine."""

PAYLOADS = st.binary(min_size=1, max_size=MAX_PAYLOAD_BYTES)

# RFC 3720 Appendix B.4, looked up; its CRC bytes are listed as they go on the wire, low byte
# first. The last is the RFC's SCSI Read (10) command PDU.
RFC_3720_B4 = [
    ("00" * 32, "aa36918a"),
    ("ff" * 32, "43aba862"),
    (bytes(range(32)).hex(), "4e79dd46"),
    (bytes(range(31, -1, -1)).hex(), "5cdb3f11"),
    (
        "01c00000 00000000 00000000 00000000 14000000 00000400"
        "00000014 00000018 28000000 00000000 02000000 00000000",
        "563a96d9",
    ),
]

# Cheshire and Baker 1999, in the rows that the encyclopaedia article on COBS lists, looked up;
# without the delimiter. Only rows that fit a frame.
COBS_ROWS = [
    ("00", "0101"),
    ("0000", "010101"),
    ("001100", "01021101"),
    ("11220033", "0311220233"),
    ("11223344", "0511223344"),
    ("11000000", "0211010101"),
]


def reference_crc32c(data: bytes) -> int:
    """Bit by bit from the definition in RFC 3720 section 12.1: polynomial 0x11EDC6F41, bits
    low first (so 0x82F63B78), register of ones, complemented at the end."""
    register = 0xFFFFFFFF
    for byte in data:
        register ^= byte
        for _ in range(8):
            register = (register >> 1) ^ (0x82F63B78 if register & 1 else 0)
    return register ^ 0xFFFFFFFF


def reference_cobs(data: bytes) -> bytes:
    """The 1999 paper's rule for less than 254 bytes: cut at zeros, put each run's length + 1
    in front of it."""
    return b"".join(bytes([len(run) + 1]) + run for run in data.split(b"\0"))


def read(stream: bytes, chunk: int) -> list[bytes | Dropped]:
    decoder = FrameDecoder()
    return [
        piece
        for start in range(0, len(stream), chunk)
        for piece in decoder.feed(stream[start : start + chunk])
    ]


@pytest.mark.parametrize(("data", "wire"), RFC_3720_B4)
def test_check_of_rfc_3720_vectors_lies_in_the_frame(data: str, wire: str) -> None:
    payload = bytes.fromhex(data)
    assert cobs.decode(frame(payload)[:-1]) == payload + bytes.fromhex(wire)


def test_check_of_the_crc_catalogue() -> None:
    # Catalogue of parametrised CRC algorithms, CRC-32/ISCSI: check value 0xE3069283, looked up.
    assert cobs.decode(frame(b"123456789")[:-1])[9:] == bytes.fromhex("839206e3")
    assert reference_crc32c(b"123456789") == 0xE3069283


def test_residue_that_the_decoder_compares_with() -> None:
    # The register after a good frame, before the last complement: 0xB798B438 in the catalogue's
    # entry CRC-32/ISCSI, 0x1C2D19ED in RFC 3720 section 12.1, which counts the bits the other
    # way round. Both from memory; the RFC's vectors bind them.
    crc32c = mkCrcFun("crc-32c")
    for data, wire in RFC_3720_B4:
        register = crc32c(bytes.fromhex(data + wire)) ^ 0xFFFFFFFF
        assert register == 0xB798B438
        assert int(f"{register:032b}"[::-1], 2) == 0x1C2D19ED


@pytest.mark.parametrize(("raw", "stuffed"), COBS_ROWS)
def test_stuffing_of_published_rows(raw: str, stuffed: str) -> None:
    assert cobs.encode(bytes.fromhex(raw)).hex() == stuffed
    assert reference_cobs(bytes.fromhex(raw)).hex() == stuffed


@STEADY
@given(PAYLOADS)
def test_frame_is_what_the_definitions_say(payload: bytes) -> None:
    check = reference_crc32c(payload).to_bytes(4, "little")
    assert frame(payload) == reference_cobs(payload + check) + b"\0"


@STEADY
@given(PAYLOADS)
def test_frame_has_one_zero_byte_at_its_end_and_six_bytes_more(payload: bytes) -> None:
    framed = frame(payload)
    assert framed.index(0) == len(framed) - 1
    assert len(framed) == len(payload) + 6 <= 64


@pytest.mark.parametrize("length", [0, MAX_PAYLOAD_BYTES + 1, 1000])
def test_frame_refuses_empty_and_too_long(length: int) -> None:
    with pytest.raises(LocalProtocolError, match=f"1 to 58 bytes, this one {length}"):
        frame(bytes(length))


@STEADY
@given(st.lists(PAYLOADS, max_size=20), st.integers(1, 200))
def test_a_clean_stream_comes_out_in_order_in_any_chunks(payloads: list[bytes], chunk: int) -> None:
    stream = b"".join(map(frame, payloads))
    assert read(stream, chunk) == payloads
    assert read(stream, 1) == payloads
    assert read(stream, len(stream) or 1) == payloads


def test_trailing_bytes_wait_for_their_delimiter() -> None:
    decoder = FrameDecoder()
    second = frame(b"second")
    assert decoder.feed(frame(b"first") + second[:-1]) == [b"first"]
    assert decoder.feed(b"\0") == [b"second"]
    assert (decoder.frames, decoder.dropped) == (2, 0)


def test_nothing_in_nothing_out() -> None:
    assert FrameDecoder().feed(b"") == []


def test_empty_pieces_are_skipped_in_silence() -> None:
    decoder = FrameDecoder()
    assert decoder.feed(b"\0\0\0" + frame(b"a") + b"\0\0" + frame(b"b")) == [b"a", b"b"]
    assert decoder.dropped == 0


@pytest.mark.parametrize("cut", range(1, 12))
def test_joins_mid_stream(cut: int) -> None:
    stream = frame(b"missed")[cut:] + frame(b"heard")
    found = read(stream, 5)
    assert found[-1] == b"heard"
    assert all(isinstance(piece, Dropped) for piece in found[:-1])
    assert len(found) == (1 if cut == 11 else 2)


@pytest.mark.parametrize(
    ("piece", "reason"),
    [
        (b"\x05ab", Drop.STUFFING),  # announces four bytes, holds two
        (b"\xff", Drop.STUFFING),
        (b"\x01", Drop.TOO_SHORT),  # stuffed nothing
        (cobs.encode(b"abcd"), Drop.TOO_SHORT),
        (cobs.encode(bytes.fromhex("00000000")), Drop.TOO_SHORT),  # the check of nothing
        (cobs.encode(b"a" + bytes(4)), Drop.DAMAGED),
        (b"a" * 64, Drop.TOO_LONG),
        (b"\xff" * 700, Drop.TOO_LONG),
    ],
)
@pytest.mark.parametrize("chunk", [1, 7, 1000])
def test_says_why_a_piece_was_dropped(piece: bytes, reason: Drop, chunk: int) -> None:
    found = read(piece + b"\0" + frame(b"next"), chunk)
    assert found == [Dropped(reason, piece[:64]), b"next"]


def test_a_good_check_does_not_excuse_a_frame_that_is_too_long() -> None:
    payload = bytes(range(1, MAX_PAYLOAD_BYTES + 2))
    whole = payload + reference_crc32c(payload).to_bytes(4, "little")
    assert len(whole) == MAX_FRAME_BYTES + 1
    stream = reference_cobs(whole) + b"\0"
    for chunk in (1, 63, 100):
        assert read(stream, chunk) == [Dropped(Drop.TOO_LONG, stream[:64])]


def test_the_longest_frame_passes_byte_by_byte() -> None:
    payload = bytes([0xFF]) * MAX_PAYLOAD_BYTES
    assert read(frame(payload), 1) == [payload]


@STEADY
@given(st.lists(st.binary(max_size=300), max_size=30))
def test_holds_bounded_memory_whatever_comes(chunks: list[bytes]) -> None:
    decoder = FrameDecoder()
    for chunk in chunks:
        decoder.feed(chunk)
        assert len(decoder._held) <= 64


def test_a_stream_without_delimiters_is_one_drop() -> None:
    decoder = FrameDecoder()
    for _ in range(100):
        assert decoder.feed(b"\x55" * 1000) == []
    assert decoder.feed(b"\0" + frame(b"x")) == [Dropped(Drop.TOO_LONG, b"\x55" * 64), b"x"]


@STEADY
@given(PAYLOADS, st.data())
def test_every_single_damaged_byte_is_noticed_and_left_behind(
    payload: bytes, data: st.DataObject
) -> None:
    # A CRC of 32 bits finds every burst of up to 32 bits (Peterson and Brown 1961); a byte that
    # COBS reads as a length may damage more, and then the odds are one in 2 to the 32.
    framed = bytearray(frame(payload))
    place = data.draw(st.integers(0, len(framed) - 1))
    framed[place] ^= data.draw(st.integers(1, 255))
    found = read(bytes(framed) + b"\0" + frame(b"after"), 16)
    assert found[-1] == b"after"
    assert payload not in found
    assert all(isinstance(piece, Dropped) for piece in found[:-1])


@STEADY
@given(st.lists(st.one_of(PAYLOADS, st.binary(max_size=90).map(bytearray)), max_size=12))
def test_resynchronises_after_any_noise_at_the_next_zero_byte(
    parts: list[bytes | bytearray],
) -> None:
    """Noise is a bytearray, a payload bytes; a payload after a zero byte always arrives."""
    stream = b""
    for part in parts:
        stream += b"\0" + (bytes(part) if isinstance(part, bytearray) else frame(part))
    payloads = [part for part in parts if isinstance(part, bytes)]
    arrived = [piece for piece in read(stream + b"\0", 13) if isinstance(piece, bytes)]
    assert arrived == payloads


def test_counts_what_came_and_what_was_dropped() -> None:
    decoder = FrameDecoder()
    decoder.feed(b"junk\0" + frame(b"a") + frame(b"b") + b"\x09\0")
    assert (decoder.frames, decoder.dropped) == (2, 2)


def test_reset_forgets_the_piece_begun_and_keeps_the_counts() -> None:
    decoder = FrameDecoder()
    decoder.feed(frame(b"a") + b"half a fra")
    decoder.reset()
    assert decoder.feed(frame(b"b")) == [b"b"]
    assert (decoder.frames, decoder.dropped) == (2, 0)


def test_random_noise_gives_no_payload() -> None:
    # 200,000 random bytes hold some 800 pieces; a 16-bit check would pass one in 80 such runs.
    noise = random.Random(3).randbytes(200_000)
    found = read(noise, 512)
    assert len(found) > 500
    assert all(isinstance(piece, Dropped) for piece in found)
