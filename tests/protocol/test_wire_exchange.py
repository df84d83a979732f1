"""WIRE.md's worked exchange: each frame is what the page says, and a module would answer so."""

import re
from pathlib import Path
from typing import Any, TypeVar

import pytest

from protocol.allegiance import Allegiance
from protocol.clock import ModuleClock
from protocol.codes import AnswerState
from protocol.command_memory import CommandMemory, Fresh, Reply
from protocol.frame import FrameDecoder
from protocol.message import (
    BOUND_UNKNOWN,
    Answer,
    Echo,
    Facts,
    Packet,
    Permit,
    Pivot,
    Presence,
    Probe,
    Release,
    RollCall,
    Stop,
    Stopped,
    decode,
)
from tests.support.independent import crc32c

PAGE = (Path(__file__).parents[2] / "protocol/WIRE.md").read_text()
SECTION = PAGE[PAGE.index("## A worked exchange") : PAGE.index("## Vectors")]
ROWS = re.findall(r"^\| (console|birch) \| (\w+) \| `([0-9a-f]+)` \| (.*) \|$", SECTION, re.M)
PACKETS = [decode(piece) for row in ROWS for piece in FrameDecoder().feed(bytes.fromhex(row[2]))
           if isinstance(piece, bytes)]  # fmt: skip
MS_NS, US_NS = 1_000_000, 1_000

_T = TypeVar("_T")


def of(kind: type[_T]) -> list[_T]:
    """The messages of one kind, in order."""
    return [each.message for each in PACKETS if isinstance(each.message, kind)]


def told(kind: type[Any]) -> list[str]:
    """What the page says of each of them."""
    return [text for _, name, _, text in ROWS if name == kind.__name__]


def test_every_line_is_one_good_frame_of_the_message_that_it_names() -> None:
    assert len(ROWS) == len(PACKETS) == 19
    for (sender, name, _, _), packet in zip(ROWS, PACKETS, strict=True):
        assert type(packet.message).__name__ == name
        assert packet.source == {"console": 0x0001, "birch": 0x0011}[sender]


def test_what_the_text_says_of_the_fields() -> None:
    (roll,), (presence,), (pivot, again) = of(RollCall), of(Presence), of(Pivot)
    assert (roll.epoch, roll.console) == (1_700_000_000, 0x5EED0042)
    assert (presence.epoch, presence.console) == tuple(roll)
    assert (presence.identity, presence.boot) == (0x8000_00AA_BBCC_2211, 0x0A0B0C0D)
    assert (presence.time_ms, presence.owner_left_ms, presence.face_up) == (5_000, 3_000, 1)
    assert (pivot.number, pivot.direction, pivot.speed_rpm) == (1, 1, 5200)
    assert pivot == again
    assert [each.stop_number for each in of(Stop)] == [1]
    assert [(each.stop_number, each.latched) for each in of(Stopped)] == [(1, 1), (1, 0)]


def test_the_clock_is_what_the_four_timestamps_give() -> None:
    (first, second), (echo, again) = of(Probe), of(Echo)
    assert (first.bound_ms, first.sequence, echo.sequence) == (BOUND_UNKNOWN, 1, 1)
    assert "sent at 2,010.000 ms" in told(Probe)[0]
    assert "heard at 5,022.000 ms of module time, held for 0.180 ms" in told(Echo)[0]
    assert "comes at 2,034.180 ms: offset 3,000 ms, give or take 12" in told(Echo)[0]
    assert (echo.received_us, echo.held_us) == (5_022_000, 180)
    clock, heard_ns = ModuleClock(US_NS), echo.received_us * US_NS
    clock.sample(2_010 * MS_NS, heard_ns, heard_ns + echo.held_us * US_NS, 2_034_180 * US_NS)
    at_ns = 2_060 * MS_NS
    assert clock.offset_ns(at_ns) == 3_000 * MS_NS
    assert 12 * MS_NS < clock.bound_ns(at_ns) < 13 * MS_NS
    # Rounded up, and one more.
    assert (second.offset_ms, second.bound_ms) == (3_000, 13 + 1)
    assert (again.sequence, again.received_us) == (second.sequence, 5_072_000)
    # The latest start is 5 s after the order, less the bound, rounded down.
    latest_ms = (clock.module_time_ns(7_100 * MS_NS) - clock.bound_ns(at_ns)) // MS_NS
    assert of(Pivot)[0].latest_ms == latest_ms == 10_087


def test_whom_it_follows_and_until_when_it_may_turn_its_wheel() -> None:
    module = Allegiance()
    (roll,), (first, second), permits = of(RollCall), of(Probe), of(Permit)
    assert module.roll_call(roll.epoch, roll.console, 5_000)
    assert module.owner_left_ms(5_000) == of(Presence)[0].owner_left_ms
    module.hear_probe(first, 5_022)
    assert not module.clock_told
    module.hear_probe(second, 5_072)
    module.hear_permit(permits[0], 5_090)
    assert "= 6,085 ms of module time" in told(Permit)[0]
    assert module.permit_left_ms(6_084) == 1
    assert module.permit_left_ms(6_085) == 0
    # An eighth of a second later.
    assert permits[1].expiry_ms - permits[0].expiry_ms == 125
    module.hear_permit(permits[1], 5_215)
    started_ms, spin_up_ms = of(Facts)[0].started_ms, of(Facts)[0].spin_up_ms
    assert module.permit_left_ms(started_ms + spin_up_ms) > 0
    assert started_ms <= of(Pivot)[0].latest_ms
    module.release(of(Release)[0].console)
    assert module.owner_left_ms(6_000) == 0


def test_the_memory_answers_as_the_page_shows() -> None:
    (presence,), (first, again), (accepted, repeated) = of(Presence), of(Pivot), of(Answer)
    memory = CommandMemory(presence.boot, presence.identity)
    assert memory.adopt(presence.epoch)
    assert memory.judge(first) == Fresh()
    assert accepted == memory.answer(first.number, AnswerState.ACCEPTED, expect_ms=1500)
    memory.remember(first.number, accepted)
    assert memory.judge(again) == Reply(accepted, repeat=True)
    assert repeated == accepted
    (facts,) = of(Facts)
    memory.remember(facts.number, facts)
    assert memory.judge(again) == Reply(facts, repeat=True)


def test_the_first_frame_taken_apart() -> None:
    parts = re.findall(
        r"^\| ((?:`[0-9a-f ]+` ?)+)\|", SECTION[SECTION.index("taken apart") :], re.M
    )
    taken_apart = bytes.fromhex("".join(parts).replace("`", " "))
    assert taken_apart.hex() == ROWS[0][2]
    packet = PACKETS[0]
    assert packet == Packet(0xFFFF, 0x0001, RollCall(1_700_000_000, 0x5EED0042))
    assert crc32c(bytes.fromhex("0101ffff0100 00f15365 4200ed5e")) == 0x696D6762


@pytest.mark.parametrize("at", range(19))
def test_a_digit_changed_is_noticed(at: int) -> None:
    data = bytearray.fromhex(ROWS[at][2])
    data[len(data) // 2] ^= 1
    pieces = FrameDecoder().feed(bytes(data))
    assert not [piece for piece in pieces if isinstance(piece, bytes)]
