"""Write the C kit's header of wire numbers from the tables that the Python side packs with.

    python -m tests.support.make_header > protocol/kit/tw_wire.h

Owns the names that the numbers have in C. Knows no behaviour: only what stands in codes.py and in
the layouts. A test fails where the header differs from what this writes.
"""

import struct
import sys
from collections.abc import Iterator
from enum import IntEnum, IntFlag
from typing import Final, get_args, get_type_hints

from protocol.codes import (
    BRIDGE_ADDRESS,
    CONSOLE_ADDRESS,
    EVERYONE_ADDRESS,
    FIRST_GROUP_ADDRESS,
    FIRST_MODULE_ADDRESS,
    GROUPS,
    LAST_MODULE_ADDRESS,
    WIRE_VERSION,
    Activity,
    AnswerState,
    Code,
    Fault,
    Flags,
    Reason,
    Setting,
    SettingId,
)
from protocol.layout import HEADER_BYTES, MAX_BODY_BYTES, TEXT_BYTES
from protocol.message import BOUND_UNKNOWN, LAYOUTS
from protocol.trace import CHUNK_BYTES, SAMPLES_A_CHUNK

_TOP: Final = """\
/* The wire's numbers: codes, offsets of fields in a payload, lengths of payloads.
 *
 * Made by tests/support/make_header.py from the tables of the Python side; not written by hand.
 * WIRE.md says what each means. TW_AT_<MESSAGE>_<FIELD> counts from the payload's first byte;
 * TW_LEN_<MESSAGE> is the whole payload, unsealed.
 */
#ifndef TW_WIRE_H
#define TW_WIRE_H
"""

_FAMILIES: Final[tuple[tuple[str, str, type[IntEnum] | type[IntFlag]], ...]] = (
    ("Messages.", "CODE", Code),
    ("Answer states.", "STATE", AnswerState),
    ("Reasons.", "REASON", Reason),
    ("Settings of a pivot: what it stands on.", "STANDS_ON", Setting),
    ("Setting numbers.", "SETTING", SettingId),
    ("Faults.", "FAULT", Fault),
    ("Flags, bits of one byte.", "FLAG", Flags),
    ("Activities.", "ACTIVITY", Activity),
)

_SINGLE: Final = {
    "WIRE_VERSION": WIRE_VERSION,
    "HEADER_BYTES": HEADER_BYTES,
    "MAX_UNSEALED": HEADER_BYTES + MAX_BODY_BYTES,
    "TEXT_BYTES": TEXT_BYTES,
    "CHUNK_BYTES": CHUNK_BYTES,
    "SAMPLES_A_CHUNK": SAMPLES_A_CHUNK,
    "GROUPS": GROUPS,
    "AT_VERSION": 0,
    "AT_CODE": 1,
    "AT_DESTINATION": 2,
    "AT_SOURCE": 4,
}
_ADDRESSES: Final = {
    "CONSOLE": CONSOLE_ADDRESS,
    "BRIDGE": BRIDGE_ADDRESS,
    "FIRST_MODULE": FIRST_MODULE_ADDRESS,
    "LAST_MODULE": LAST_MODULE_ADDRESS,
    "FIRST_GROUP": FIRST_GROUP_ADDRESS,
    "EVERYONE": EVERYONE_ADDRESS,
}
_CODE_DIGITS: Final = 2
_ADDRESS_DIGITS: Final = 4


def _family(title: str, prefix: str, members: list[tuple[str, str]]) -> Iterator[str]:
    """One enumeration, a name a line, so that a change shows as one line."""
    yield f"/* {title} */"
    yield "enum {"
    yield from (f"    TW_{prefix}{name} = {value}," for name, value in members)
    yield "};"
    yield ""


def _hex(value: int, digits: int) -> str:
    return f"0x{value:0{digits}x}"


def _named(family: type[IntEnum] | type[IntFlag]) -> list[tuple[str, str]]:
    digits = _CODE_DIGITS if family is Code else 0
    return [(each.name or "", _hex(each, digits) if digits else str(int(each))) for each in family]


def _offsets(code: Code) -> list[tuple[str, str]]:
    """Every field of one message with where it stands, and the payload's length."""
    at, named = HEADER_BYTES, []
    hints = get_type_hints(LAYOUTS[code].message_type, include_extras=True)
    for field, hint in hints.items():
        named.append((f"AT_{code.name}_{field.upper()}", str(at)))
        at += struct.calcsize("<" + get_args(hint)[1])
    return [*named, (f"LEN_{code.name}", str(at))]


def header() -> str:
    """The whole header as text."""
    lines = [_TOP]
    lines += _family("Single numbers.", "", [(name, str(it)) for name, it in _SINGLE.items()])
    lines += ["/* bound_ms of a Probe whose console does not know the clock yet. */"]
    lines += [f"#define TW_BOUND_UNKNOWN {_hex(BOUND_UNKNOWN, _ADDRESS_DIGITS)}u", ""]
    addresses = [(name, _hex(it, _ADDRESS_DIGITS)) for name, it in _ADDRESSES.items()]
    lines += _family("Addresses.", "ADDRESS_", addresses)
    for title, prefix, family in _FAMILIES:
        lines += _family(title, prefix + "_", _named(family))
    for code in Code:
        lines += _family(f"{LAYOUTS[code].message_type.__name__}.", "", _offsets(code))
    return "\n".join([*lines, "#endif", ""])


if __name__ == "__main__":
    sys.stdout.write(header())
