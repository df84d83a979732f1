"""WIRE.md against the code: every table in it that the code also knows must say the same."""

import re
import struct
from enum import Enum
from pathlib import Path

import pytest

import protocol
from protocol import codes
from protocol.allegiance import DRIFT_SHIFT, LONGEST_PERMIT_MS, OWNER_GRACE_MS
from protocol.clock import DRIFT_LIMIT_PPM, SAMPLES_KEPT
from protocol.codes import Activity, AnswerState, Code, Fault, Flags, Reason, Setting, SettingId
from protocol.command_memory import REMEMBERED_REPLIES
from protocol.frame import MAX_FRAME_BYTES, MAX_STUFFED_BYTES, frame
from protocol.message import BOUND_UNKNOWN, HEADER, LAYOUTS
from protocol.resend import ResendPolicy
from protocol.trace import ASK_AT_ONCE, CHUNK_BYTES, SAMPLES_A_CHUNK, TraceHead, TraceSample

TEXT = Path(protocol.__file__).with_name("WIRE.md").read_text(encoding="utf-8")

TYPES = {
    "u8": "B",
    "u16": "H",
    "u32": "I",
    "u64": "Q",
    "i8": "b",
    "i16": "h",
    "i32": "i",
    "text12": "12s",
    "data24": "24s",
}
BYTES = {name: struct.calcsize("<" + form) for name, form in TYPES.items()}
IN_WORDS = {8: "eight"}
UNITS = {
    "rpm": "rpm",
    "ms": "ms",
    "us": "µs",
    "mV": "mV",
    "cC": "0.01 °C",
    "ddeg": "0.1°",
    "dps": "°/s",
    "dBm": "dBm",
}


def section(heading: str) -> str:
    """The text under one heading, up to the next of the same level or above."""
    level = heading.split(maxsplit=1)[0]
    found = re.search(
        rf"^{re.escape(heading)}$\n(.*?)(?=^#{{1,{len(level)}}} |\Z)",
        TEXT,
        re.MULTILINE | re.DOTALL,
    )
    assert found, f"no heading {heading!r}"
    return found[1]


def rows(text: str) -> list[list[str]]:
    """The rows of the first table in a text, without its head."""
    lines = re.search(r"(?:^\|.*\|$\n?)+", text, re.MULTILINE)
    assert lines, "no table"
    cells = [[cell.strip() for cell in line[1:-1].split("|")] for line in lines[0].splitlines()]
    return cells[2:]


def test_the_sections_are_those_of_the_messages() -> None:
    headings = re.findall(r"^### (\w+) `0x(..)`$", TEXT, re.MULTILINE)
    documented = {(name, int(code, 16)) for name, code in headings}
    assert documented == {(each.message_type.__name__, code) for code, each in LAYOUTS.items()}
    assert [int(code, 16) for _, code in headings] == sorted(Code)


@pytest.mark.parametrize("code", sorted(LAYOUTS))
def test_each_layout(code: int) -> None:
    layout = LAYOUTS[code]
    name = layout.message_type.__name__
    text = section(f"### {name} `0x{code:02x}`")
    table = rows(text)
    assert tuple(row[1] for row in table) == layout.message_type._fields
    assert "<" + "".join(TYPES[row[2]] for row in table) == layout.body.format
    offset = HEADER.size
    for at, _, kind, _, meaning in table:
        assert int(at) == offset
        assert meaning
        offset += BYTES[kind]
    assert f"Whole payload: {offset} bytes." in text
    assert offset == HEADER.size + layout.body.size


@pytest.mark.parametrize("code", sorted(LAYOUTS))
def test_each_unit_is_that_of_the_fields_name(code: int) -> None:
    name = LAYOUTS[code].message_type.__name__
    for _, field, _, unit, _ in rows(section(f"### {name} `0x{code:02x}`")):
        suffix = field.rsplit("_", 1)[-1] if "_" in field else ""
        assert unit == UNITS.get(suffix, "s" if field == "epoch" else "")


@pytest.mark.parametrize(
    ("heading", "codes_of"),
    [
        ("### Answer states", AnswerState),
        ("### Reasons", Reason),
        ("### Settings", Setting),
        ("### Activities", Activity),
        ("### Flags", Flags),
        ("### Setting numbers", SettingId),
        ("### Faults", Fault),
    ],
)
def test_each_table_of_codes(heading: str, codes_of: type[Enum]) -> None:
    documented = [(int(value), name) for value, name, _ in rows(section(heading))]
    assert documented == [(each.value, each.name) for each in codes_of]


def test_the_header() -> None:
    table = rows(section("## Payload"))
    assert [row[1] for row in table] == ["version", "code", "destination", "source", "body"]
    assert "<" + "".join(TYPES[row[2]] for row in table[:-1]) == HEADER.format
    assert [int(row[0]) for row in table] == [0, 1, 2, 4, HEADER.size]


def test_the_addresses() -> None:
    after_header = section("## Payload").split("is dropped.")[1]
    documented = [cell for cell, _ in rows(after_header)]
    assert documented == [
        f"0x{codes.CONSOLE_ADDRESS:04x}",
        f"0x{codes.BRIDGE_ADDRESS:04x}",
        f"0x{codes.FIRST_MODULE_ADDRESS:04x} to 0x{codes.LAST_MODULE_ADDRESS:04x}",
        f"0x{codes.FIRST_GROUP_ADDRESS:04x} to 0x{codes.EVERYONE_ADDRESS - 1:04x}",
        f"0x{codes.EVERYONE_ADDRESS:04x}",
    ]


def test_the_figures_in_the_text() -> None:
    policy = ResendPolicy()
    plain = " ".join(TEXT.split())
    longest = HEADER.size + max(layout.body.size for layout in LAYOUTS.values())
    for sentence in [
        f"at most {MAX_FRAME_BYTES} bytes, so at most {len(frame(bytes(58)))} on the wire",
        f"longer than {MAX_STUFFED_BYTES} bytes",
        f"at most {longest} bytes of payload",
        f"its last {REMEMBERED_REPLIES} replies",
        f"again each timeout, {policy.tries} times",
        f"expect_ms and {policy.finish_margin_ns // 10**6} ms have passed",
        f"between {policy.minimum_ns // 10**6} ms and {policy.maximum_ns // 10**9} s",
        f"{policy.initial_ns // 10**6} ms before the first measurement",
        f"granularity ({policy.granularity_ns // 10**6} ms)",
        f"**owns** a module for {OWNER_GRACE_MS:,} ms",
        f"A permit that would last longer than {LONGEST_PERMIT_MS:,} ms is none",
        f"(age of what was told) / 2^{DRIFT_SHIFT} - 1 ms",
        f"apart by {DRIFT_LIMIT_PPM} parts in a million",
        f"Of the last {IN_WORDS[SAMPLES_KEPT]} exchanges",
        f"the group of address 0x{codes.FIRST_GROUP_ADDRESS:04x} + n",
        f"n from 0 to {codes.GROUPS - 1}",
        f"0x{BOUND_UNKNOWN:04x}: not known yet",
    ]:
        assert sentence in plain


STRUCT_OF = {"u32": "I", "u16": "H", "i16": "h", "12 bytes": "12x"}


def test_the_head_and_the_samples_of_a_trace() -> None:
    text = section("## Traces")
    head, sample = re.findall(r"(?:^\|.*\|$\n?)+", text, re.MULTILINE)
    assert [row[1] for row in rows(head)[:-1]] == list(TraceHead._fields)
    assert [row[1] for row in rows(sample)] == list(TraceSample._fields)
    for table, size in ((head, CHUNK_BYTES), (sample, CHUNK_BYTES // SAMPLES_A_CHUNK)):
        offset = 0
        for at, _, kind, _ in rows(table):
            assert int(at) == offset
            offset += struct.calcsize("<" + STRUCT_OF[kind])
        assert offset == size
    assert f"for up to {IN_WORDS[ASK_AT_ONCE]} chunks at once" in " ".join(text.split())


def test_the_interlocks_are_told_in_known_words() -> None:
    table = rows(section("### The module's own interlocks"))
    assert {row[2] for row in table} <= {reason.name for reason in Reason}


def test_what_may_go_to_groups_and_to_everyone() -> None:
    plain = " ".join(TEXT.split())
    assert "harm: RollCall, Permit, Release, Go, Stop, Clear; anything else" in plain


def test_the_list_of_the_command_memory_names_its_refusals_in_order() -> None:
    table = rows(section("### The module: at most once"))
    told = [row[1].rpartition(", ")[2] for row in table if "REFUSED" in row[1]]
    assert told == [
        each.name
        for each in (
            Reason.OTHER_IDENTITY,
            Reason.OTHER_BOOT,
            Reason.OWNED,
            Reason.OTHER_EPOCH,
            Reason.BAD_FIELD,
            Reason.NUMBER_PASSED,
        )
    ]
