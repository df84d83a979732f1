"""WIRE.md's worked exchange: each frame is what the page says, and a module would answer so."""

import re
from pathlib import Path

import pytest

from protocol.codes import AnswerState
from protocol.command_memory import CommandMemory, Fresh, Reply
from protocol.frame import FrameDecoder
from protocol.message import Answer, Facts, Packet, Pivot, Presence, RollCall, decode
from tests.support.independent import crc32c

PAGE = (Path(__file__).parents[2] / "protocol/WIRE.md").read_text()
SECTION = PAGE[PAGE.index("## A worked exchange") : PAGE.index("## Vectors")]
ROWS = re.findall(r"^\| (console|birch) \| (\w+) \| `([0-9a-f]+)` \| (.*) \|$", SECTION, re.M)
PACKETS = [decode(piece) for row in ROWS for piece in FrameDecoder().feed(bytes.fromhex(row[2]))
           if isinstance(piece, bytes)]  # fmt: skip


def test_every_line_is_one_good_frame_of_the_message_that_it_names() -> None:
    assert len(ROWS) == len(PACKETS) == 12
    for (sender, name, _, _), packet in zip(ROWS, PACKETS, strict=True):
        assert type(packet.message).__name__ == name
        assert packet.source == {"console": 0x0001, "birch": 0x0011}[sender]


def test_what_the_text_says_of_the_fields() -> None:
    roll, presence, pivot = (PACKETS[at].message for at in (0, 1, 3))
    assert isinstance(roll, RollCall)
    assert isinstance(presence, Presence)
    assert isinstance(pivot, Pivot)
    assert roll.epoch == 1_700_000_000 == presence.epoch
    assert (presence.identity, presence.boot) == (0x8000_00AA_BBCC_2211, 0x0A0B0C0D)
    assert (pivot.number, pivot.direction, pivot.speed_rpm) == (1, 1, 5200)


def test_the_memory_answers_as_the_page_shows() -> None:
    presence, first, again = (PACKETS[at].message for at in (1, 3, 5))
    assert isinstance(presence, Presence)
    assert isinstance(first, Pivot)
    assert isinstance(again, Pivot)
    memory = CommandMemory(presence.boot, presence.identity)
    assert memory.roll_call(presence.epoch)
    assert memory.judge(first) == Fresh()
    accepted = memory.answer(first.number, AnswerState.ACCEPTED, expect_ms=1500)
    assert accepted == PACKETS[4].message
    memory.remember(first.number, accepted)
    assert memory.judge(again) == Reply(accepted, repeat=True)
    facts = PACKETS[7].message
    assert isinstance(facts, Facts)
    memory.remember(facts.number, facts)
    assert memory.judge(again) == Reply(facts, repeat=True)
    assert isinstance(PACKETS[6].message, Answer)


def test_the_first_frame_taken_apart() -> None:
    parts = re.findall(
        r"^\| ((?:`[0-9a-f ]+` ?)+)\|", SECTION[SECTION.index("taken apart") :], re.M
    )
    taken_apart = bytes.fromhex("".join(parts).replace("`", " "))
    assert taken_apart.hex() == ROWS[0][2]
    packet = PACKETS[0]
    assert packet == Packet(0xFFFF, 0x0001, RollCall(1_700_000_000))
    assert crc32c(bytes.fromhex("0101ffff010000f15365")) == 0x8966C06D


@pytest.mark.parametrize("at", range(12))
def test_a_digit_changed_is_noticed(at: int) -> None:
    data = bytearray.fromhex(ROWS[at][2])
    data[len(data) // 2] ^= 1
    pieces = FrameDecoder().feed(bytes(data))
    assert not [piece for piece in pieces if isinstance(piece, bytes)]
