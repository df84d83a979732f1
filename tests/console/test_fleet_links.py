"""Links: counts, both directions, damage that is told once, and a link's coming and going."""

from itertools import cycle, islice

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.fleet_links import BAD_DROPS, BAD_WITHIN_FRAMES
from protocol.codes import CONSOLE_ADDRESS
from protocol.frame import frame
from protocol.message import HEADER, Packet, RollCall
from storage.records import BytesIn, BytesOut, LinkChanged, SlotsPlanned
from storage.rows import LinkEventRow
from tests.support.wire_script import (
    ADDRESS,
    CONSOLE,
    EPOCH,
    Fold,
    Script,
    from_module,
    pivot,
    planned,
    presence,
    query,
    telemetry,
    to_everyone,
    to_module,
)

URL = "sim://?modules=1"


def spoiled(good: bytes) -> bytes:
    """The frame with one bit turned that leaves the stuffing good and the check bad."""
    bad = bytearray(good)
    at = next(
        index for index in range(2, len(bad) - 1) if bad[index] not in {0, 1} and bad[index] & 2
    )
    bad[at] ^= 1
    return bytes(bad) if bad[at] else bytes(good)


def test_changes_of_a_link_are_rows_and_show() -> None:
    script = Script().open()
    fold = Fold(script)
    assert fold.table("link_events") == [LinkEventRow(2, script.t_ns, 0, URL, "open", "")]
    assert (fold.view.links[0].url, fold.view.links[0].state) == (URL, "open")
    script.add(LinkChanged, 0, URL, "closed", "")
    fold.on()
    assert fold.view.links[0].state == "closed"
    assert fold.alarms == []


def test_a_lost_link_is_an_alarm_and_a_notice() -> None:
    script = Script().open()
    script.add(LinkChanged, 0, URL, "lost", "unplugged")
    fold = Fold(script)
    assert fold.alarms == ["link lost"]
    assert "unplugged" in fold.table("alarms")[0].detail
    assert fold.view.notices == ((script.t_ns, "link 0 lost: unplugged"),)


def test_bytes_and_frames_are_counted_each_way() -> None:
    script = Script().open()
    inward = from_module(presence()) + from_module(telemetry(1)) + b"\x02\x41\x00"
    outward = to_everyone(RollCall(EPOCH, CONSOLE))
    script.add(BytesIn, 0, inward)
    script.add(BytesOut, 0, outward)
    link = Fold(script).view.links[0]
    assert (link.frames_in, link.dropped, link.bytes_in) == (2, 1, len(inward))
    assert (link.frames_out, link.bytes_out) == (1, len(outward))


def test_links_are_counted_apart() -> None:
    script = Script().open()
    script.add(LinkChanged, 1, URL, "open", "")
    script.heard(presence(), link=1)
    assert [(link.link, link.frames_in) for link in Fold(script).view.links] == [(0, 0), (1, 1)]


def test_halves_of_two_links_do_not_make_a_frame() -> None:
    script = Script().open()
    whole = from_module(presence())
    script.add(BytesIn, 0, whole[:10])
    script.add(BytesIn, 1, whole[10:])
    assert Fold(script).view.modules == ()


def test_what_a_lost_link_had_begun_does_not_spoil_the_next_frame() -> None:
    script = Script().open()
    script.add(BytesIn, 0, from_module(telemetry(1))[:12])
    script.add(LinkChanged, 0, URL, "lost", "unplugged")
    script.add(LinkChanged, 0, URL, "open", "")
    fold = Fold(script.heard(presence()))
    assert len(fold.view.modules) == 1
    assert fold.view.links[0].dropped == 0


def test_half_a_frame_out_before_a_loss_is_not_a_sending() -> None:
    script = Script().open().heard(presence()).order(planned())
    script.add(BytesOut, 0, to_module(pivot())[:9])
    script.add(LinkChanged, 0, URL, "lost", "unplugged")
    script.add(LinkChanged, 0, URL, "open", "")
    fold = Fold(script.sent(pivot()))
    assert fold.events() == ["ordered", "sent"]


def test_inbound_packets_are_handed_on_in_order_with_their_link() -> None:
    script = Script().open()
    script.add(BytesIn, 3, from_module(presence()) + from_module(telemetry(1), 0x22))
    step = Fold(script).steps[-1]
    assert step.packets == [
        (3, Packet(CONSOLE_ADDRESS, ADDRESS, presence())),
        (3, Packet(CONSOLE_ADDRESS, 0x22, telemetry(1))),
    ]
    script.sent(query())
    assert Fold(script).steps[-1].packets == []


def test_an_echo_of_our_own_command_is_no_sending() -> None:
    """A half-duplex radio may give back what it was given."""
    script = Script().open().heard(presence()).order(planned())
    script.add(BytesIn, 0, to_module(pivot()))
    fold = Fold(script)
    assert fold.events() == ["ordered"]
    assert len(fold.steps[-1].packets) == 1


def test_a_module_s_word_going_out_is_no_news() -> None:
    script = Script().open()
    script.add(BytesOut, 0, from_module(presence()))
    assert Fold(script).view.modules == ()


@pytest.mark.parametrize(
    "payload",
    [
        HEADER.pack(1, 0x7F, CONSOLE_ADDRESS, ADDRESS) + b"what",
        HEADER.pack(9, 0x83, CONSOLE_ADDRESS, ADDRESS),
        HEADER.pack(1, 0x83, CONSOLE_ADDRESS, ADDRESS) + b"short",
        b"\x01",
    ],
)
def test_a_good_frame_without_meaning_counts_as_dropped(payload: bytes) -> None:
    script = Script().open().heard(presence())
    script.add(BytesIn, 0, frame(payload))
    script.add(BytesOut, 0, frame(payload))
    fold = Fold(script)
    assert (fold.view.links[0].frames_in, fold.view.links[0].dropped) == (1, 1)
    assert fold.view.links[0].frames_out == 0
    assert fold.steps[-2].rows == []


# -- when it gets bad --------------------------------------------------------------------


def stream(pattern: str) -> bytes:
    """Telemetry frames, ``x`` for each spoiled one."""
    good = (from_module(telemetry(count)) for count in range(len(pattern)))
    return b"".join(
        spoiled(each) if mark == "x" else each for each, mark in zip(good, pattern, strict=True)
    )


def alarms_of(pattern: str, chunk: int = 512) -> list[str]:
    """Alarms that such a stream gives when it comes in such chunks."""
    script = Script().open().heard(presence())
    data = stream(pattern)
    for start in range(0, len(data), chunk):
        script.add(BytesIn, 0, data[start : start + chunk])
    fold = Fold(script)
    assert fold.view.links[0].dropped == pattern.count("x")
    assert len([text for _, text in fold.view.notices if "dropped" in text]) == len(fold.alarms)
    return fold.alarms


def test_a_few_drops_are_counted_and_not_told() -> None:
    assert alarms_of("x" * 15) == []
    assert alarms_of("x....." * 60) == []


def test_many_drops_are_told_once_with_their_reasons() -> None:
    script = Script().open()
    script.add(BytesIn, 0, stream("x" * 100))
    fold = Fold(script)
    assert fold.alarms == ["damage"]
    assert "check failed 16" in fold.table("alarms")[0].detail
    assert alarms_of("x" * 16) == ["damage"]


def test_told_again_once_it_had_been_good_in_between() -> None:
    bad, good = "x" * 20, "." * 200
    assert alarms_of(bad + good + bad) == ["damage", "damage"]
    assert alarms_of(bad + "x.." * 30 + bad) == ["damage"]


def test_the_border_is_a_quarter() -> None:
    """16 drops within 64 frames are a quarter of them, told; the same 16 within 65 are not."""
    within = "x" + "." * (BAD_WITHIN_FRAMES - BAD_DROPS) + "x" * (BAD_DROPS - 1)
    assert len(within) == 64
    assert alarms_of(within) == ["damage"]
    assert alarms_of(within.replace("x.", "x..", 1)) == []


@given(st.lists(st.sampled_from("x."), max_size=150).map("".join), st.integers(1, 90))
def test_chunks_do_not_change_what_is_told(pattern: str, chunk: int) -> None:
    assert alarms_of(pattern, chunk) == alarms_of(pattern, 10_000)


def test_noise_for_ever_is_one_alarm_and_bounded_memory() -> None:
    noise = bytes(islice(cycle(range(1, 256)), 60_000))
    script = Script().open()
    for start in range(0, len(noise), 1000):
        script.add(BytesIn, 0, noise[start : start + 1000])
    fold = Fold(script)
    assert fold.view.links[0].dropped == 0  # no delimiter came, so no frame was begun or lost
    script.add(BytesIn, 0, b"\0" + b"\x05\0" * 500)
    fold.on()
    assert fold.alarms == ["damage"]
    assert fold.view.links[0].dropped == 501


def shared_out(asked_ms: int, period_ms: int, left_out: int) -> list[str]:
    """What a person is told of a channel of 9,600 bit/s."""
    script = Script().open()
    script.add(SlotsPlanned, 0, 9_600, 25.0, 12, left_out, asked_ms, period_ms, 24.9)
    return [text for _, text in Fold(script).view.notices]


def test_telemetry_that_a_channel_slows_is_told_of() -> None:
    assert shared_out(500, 500, 0) == []
    assert shared_out(500, 1_720, 0) == [
        "link 0: 9600 bits a second carry the telemetry of 12 modules every 1.72 s, not every "
        "0.5 s, in 25 % of the time"
    ]
    assert shared_out(500, 500, 2) == ["link 0: no telemetry slot for 2 modules"]
