"""How a message is declared, and the table from wire code to layout that this fills.

Owns the field types, the declaration, and the tables that packing and unpacking read. The
declarations themselves are in requests.py (what a console sends) and reports.py (what a module
or a bridge sends); message.py packs and unpacks with them. Knows no message by name.

A declaration is a NamedTuple whose annotations give each field's width on the wire; the unit
is in the field's name. NamedTuple and not a frozen dataclass because a frozen, slotted
dataclass of nine fields takes 1.6 us to make and a tuple 0.23 us (CPython 3.11, measured), and
this is the hottest path of the console. Equality is strict about the type, as a dataclass's is.

Payload: version u8, code u8, destination u16, source u16, body. All little-endian.
"""

import struct
from collections.abc import Callable
from functools import partial
from typing import Annotated, Any, Final, NamedTuple, TypeVar, cast, get_args, get_type_hints

from protocol.codes import Code
from protocol.errors import LocalProtocolError

HEADER: Final = struct.Struct("<BBHH")
HEADER_BYTES: Final = HEADER.size
MAX_BODY_BYTES: Final = 36
"""62 bytes a frame before stuffing, less header 6, check 4, and 16 kept free for the seal."""

TEXT_BYTES: Final = 12

U8 = Annotated[int, "B"]
U16 = Annotated[int, "H"]
U32 = Annotated[int, "I"]
U64 = Annotated[int, "Q"]
I8 = Annotated[int, "b"]
I16 = Annotated[int, "h"]
I32 = Annotated[int, "i"]
Text12 = Annotated[bytes, "12s"]
"""UTF-8, cut to 12 bytes at a character's border, padded with zero bytes."""
Data24 = Annotated[bytes, "24s"]
"""Bytes of a motion trace, as they are."""

_MessageT = TypeVar("_MessageT")


class Layout(NamedTuple):
    """What is known of one message: its class, its body's struct, its constructor, and which of
    its fields are bytes, each with its width."""

    message_type: type[Any]
    body: struct.Struct
    make: Callable[[Any], Any]
    texts: tuple[tuple[int, int], ...]


class Reader(NamedTuple):
    """What decoding needs of a layout, looked up beforehand: it is the console's hottest path."""

    unpack_from: Callable[[bytes, int], tuple[Any, ...]]
    payload_bytes: int
    make: Callable[[Any], Any]


LAYOUTS: Final[dict[int, Layout]] = {}
READERS: Final[dict[int, Reader]] = {}
CODES: Final[dict[type[Any], Code]] = {}


def _same(left: object, right: object) -> bool:
    return type(left) is type(right) and tuple.__eq__(cast(Any, left), cast(Any, right))


def declare(code: Code) -> Callable[[type[_MessageT]], type[_MessageT]]:
    """Enter the decorated NamedTuple in the table under ``code``.

    Raises LocalProtocolError for a body that would leave no room for a seal.
    """

    def enter(cls: type[_MessageT]) -> type[_MessageT]:
        hints = get_type_hints(cls, include_extras=True)
        forms = [get_args(hint)[1] for hint in hints.values()]
        body = struct.Struct("<" + "".join(forms))
        texts = tuple((at, int(form[:-1])) for at, form in enumerate(forms) if form[-1] == "s")
        if body.size > MAX_BODY_BYTES:
            raise LocalProtocolError(f"{cls.__name__}: {body.size} bytes leave no room for a seal")
        named = cast(Any, cls)
        named.__eq__ = _same
        named.__ne__ = lambda left, right: not _same(left, right)
        named.__hash__ = lambda self: hash((cls, tuple(self)))
        # tuple.__new__ and not _make: the struct has already fixed the length that _make would
        # check, and the check costs a third of the making.
        make = partial(cast(Any, tuple.__new__), cls)
        LAYOUTS[code] = Layout(cls, body, make, texts)
        READERS[code] = Reader(body.unpack_from, HEADER_BYTES + body.size, make)
        CODES[cls] = code
        return cls

    return enter
