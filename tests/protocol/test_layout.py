"""How messages are declared: what a declaration enters in the tables, and which it refuses."""

import struct
from collections.abc import Iterator
from typing import NamedTuple, get_type_hints

import pytest

from protocol import layout
from protocol.codes import Code
from protocol.errors import LocalProtocolError
from protocol.layout import (
    CODES,
    HEADER,
    HEADER_BYTES,
    LAYOUTS,
    MAX_BODY_BYTES,
    READERS,
    TEXT_BYTES,
    U8,
    U16,
    U32,
    U64,
    Data24,
    Text12,
    declare,
)


@pytest.fixture(autouse=True)
def _tables_put_back() -> Iterator[None]:
    """Declarations made by a test are taken out again."""
    kept = [(table, dict(table)) for table in (LAYOUTS, READERS, CODES)]
    yield
    for table, before in kept:
        table.clear()
        table.update(before)  # type: ignore[arg-type]


class Fits(NamedTuple):
    """A body of exactly as many bytes as there may be: 12 + 2 x 8 + 8 x 1."""

    name: Text12
    one: U64
    two: U64
    three: U32
    four: U32


class TooLong(NamedTuple):
    """One byte more."""

    name: Text12
    data: Data24
    more: U8


class Plain(NamedTuple):
    """A field without a width on the wire."""

    number: int


class Small(NamedTuple):
    """Three bytes."""

    one: U8
    two: U16


def test_a_declaration_enters_all_three_tables() -> None:
    assert declare(Code.STOP)(Fits) is Fits
    entered = LAYOUTS[Code.STOP]
    assert entered.message_type is Fits
    assert entered.body.format == "<12sQQII"
    assert entered.texts == ((0, 12),)
    assert CODES[Fits] is Code.STOP
    reader = READERS[Code.STOP]
    assert reader.payload_bytes == HEADER_BYTES + MAX_BODY_BYTES
    made = reader.make(reader.unpack_from(bytes(HEADER_BYTES + MAX_BODY_BYTES), HEADER_BYTES))
    assert type(made) is Fits
    assert made == Fits(bytes(12), 0, 0, 0, 0)


def test_a_body_that_leaves_no_room_for_a_seal_is_refused() -> None:
    with pytest.raises(LocalProtocolError, match="TooLong: 37 bytes leave no room for a seal"):
        declare(Code.STOP)(TooLong)
    assert TooLong not in CODES
    assert LAYOUTS[Code.STOP].message_type.__name__ == "Stop"


def test_a_field_without_a_width_cannot_be_declared() -> None:
    with pytest.raises(IndexError):
        declare(Code.STOP)(Plain)
    assert Plain not in CODES


def test_declared_messages_are_equal_only_to_their_own_type() -> None:
    declared = declare(Code.STOP)(Small)
    assert declared(1, 2) == declared(1, 2)
    assert declared(1, 2) != declared(1, 3)
    assert declared(1, 2) != (1, 2)
    assert hash(declared(1, 2)) == hash(declared(1, 2))
    assert {declared(1, 2): "first"}[declared(1, 2)] == "first"


def test_the_header_is_six_bytes_low_byte_first() -> None:
    assert HEADER_BYTES == 6
    assert HEADER.pack(1, 0x20, 0x1234, 0xFEDC) == bytes.fromhex("0120 3412 dcfe")


def test_sixteen_bytes_are_kept_free() -> None:
    # WIRE.md, Frames: 62 bytes before stuffing, less header 6, check 4, seal 16.
    assert MAX_BODY_BYTES == 62 - 6 - 4 - 16 == 36
    assert TEXT_BYTES == 12


@pytest.mark.parametrize("name", ["U8", "U16", "U32", "U64", "I8", "I16", "I32"])
def test_a_types_name_says_its_sign_and_its_width(name: str) -> None:
    (form,) = getattr(layout, name).__metadata__
    assert struct.calcsize("<" + form) * 8 == int(name[1:])
    assert form.isupper() is (name[0] == "U")


@pytest.mark.parametrize("code", sorted(LAYOUTS))
def test_what_the_tables_say_of_one_message_agrees(code: int) -> None:
    entered = LAYOUTS[code]
    assert CODES[entered.message_type] == code
    assert READERS[code].payload_bytes == HEADER_BYTES + entered.body.size
    hints = get_type_hints(entered.message_type)
    texts = [at for at, kind in enumerate(hints.values()) if kind is bytes]
    assert [at for at, _ in entered.texts] == texts
