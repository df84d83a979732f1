"""The bridge: what it passes on, keeps waiting and loses, and says of itself; also in the world."""

from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.codes import BRIDGE_ADDRESS, CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.frame import FrameDecoder, frame
from protocol.message import (
    BridgeAsk,
    BridgeStatus,
    Packet,
    RollCall,
    Stop,
    Telemetry,
    decode,
    encode,
)
from sim_link.air import Air
from sim_link.bridge import BOOT_NS, LINE_BYTES, MOST_BYTES, QUEUE_FRAMES, Bridge
from sim_link.options import BridgeKind, SimOptions
from sim_link.world import World
from tests.support.virtual_console import CONSOLE, EPOCH, MS, S, VirtualConsole, to_all

ROLL = frame(encode(to_all(RollCall(EPOCH, CONSOLE))))
ASK = frame(encode(Packet(BRIDGE_ADDRESS, CONSOLE_ADDRESS, BridgeAsk(7))))


def bridge(kind: BridgeKind = BridgeKind.FILTERING, *, sealed: bool = False) -> Bridge:
    return Bridge(kind, sealed=sealed)


def status(answer: bytes | None) -> BridgeStatus:
    assert answer is not None
    (payload,) = FrameDecoder().feed(answer)
    assert isinstance(payload, bytes)
    message = decode(payload).message
    assert isinstance(message, BridgeStatus)
    return message


def world(**options: object) -> World:
    return World(SimOptions(**options))  # type: ignore[arg-type]


# --- alone -------------------------------------------------------------------------------


def test_good_frames_pass_and_bad_ones_are_counted() -> None:
    one = bridge()
    damaged = bytearray(ROLL)
    damaged[4] ^= 0x10
    (passed,) = one.from_line(bytes(damaged) + ROLL + frame(b"ab"))
    assert passed == (EVERYONE_ADDRESS, ROLL)
    assert one.dropped == 2  # the damaged one, and one too short for a header


@given(st.lists(st.integers(1, 9), max_size=12))
def test_in_whatever_pieces_the_line_brings_it(cuts: list[int]) -> None:
    one, data, passed = bridge(), ROLL * 3, []
    for cut in cuts:
        passed += one.from_line(data[:cut])
        data = data[cut:]
    passed += one.from_line(data)
    assert [each.data for each in passed] == [ROLL] * 3


@given(st.binary(max_size=400), st.integers(1, 50))
def test_a_modem_passes_every_byte_in_order_and_none_of_its_own(data: bytes, step: int) -> None:
    """Between zero bytes, or in pieces of its buffer's size; what it still holds is a tail."""
    one, out = bridge(BridgeKind.TRANSPARENT), []
    for start in range(0, len(data), step):
        out += one.from_line(data[start : start + step])
    assert all(each.address == EVERYONE_ADDRESS for each in out)
    assert all(1 <= len(each.data) <= MOST_BYTES for each in out)
    joined = b"".join(each.data for each in out)
    assert data.startswith(joined)
    assert len(data) - len(joined) < MOST_BYTES
    assert b"\0" not in data[len(joined) :]


def test_what_it_says_of_itself() -> None:
    one = bridge()
    one.from_line(ROLL + b"\5\5\5\0" + ASK)
    one.note_waiting(5)
    one.note_waiting(2)
    assert one.to_line(0)
    told = status(one.answer(BRIDGE_ADDRESS, ASK, 3, 12_500 * MS))
    assert told.sequence == 7
    assert (told.uptime_ms, told.queue, told.queue_most) == (12_500, 3, 5)
    assert (told.frames_from_console, told.frames_to_console, told.dropped) == (2, 1, 1)


def test_who_gets_no_answer() -> None:
    assert bridge().answer(EVERYONE_ADDRESS, ROLL, 0, 0) is None
    assert bridge().answer(BRIDGE_ADDRESS, ROLL, 0, 0) is None
    assert bridge(sealed=True).answer(BRIDGE_ADDRESS, ASK, 0, 0) is None
    assert bridge(BridgeKind.TRANSPARENT).answer(BRIDGE_ADDRESS, ASK, 0, 0) is None


def test_a_restart_forgets_half_a_frame_and_all_counts() -> None:
    one = bridge()
    one.from_line(ROLL + ROLL[:5])
    one.reset(3 * S)
    assert one.deaf(3 * S + BOOT_NS - 1)
    assert not one.deaf(3 * S + BOOT_NS)
    assert one.from_line(ROLL[5:]) == []  # the rest of a frame is no frame
    told = status(one.answer(BRIDGE_ADDRESS, ASK, 0, 5 * S))
    assert (told.uptime_ms, told.frames_from_console, told.queue_most) == (2_000, 0, 0)
    assert told.dropped == 1


def test_queues_have_an_end() -> None:
    one = bridge()
    assert one.takes(QUEUE_FRAMES - 1)
    assert not one.takes(QUEUE_FRAMES)
    assert one.to_line(LINE_BYTES - 1)
    assert not one.to_line(LINE_BYTES)
    assert one.dropped == 2


# --- in the world ------------------------------------------------------------------------


def test_frames_wait_for_a_slow_air_and_the_newest_are_dropped() -> None:
    """The line brings a hundred in 4 ms, while the air takes 23 ms for the first."""
    slow = world(modules=1, air_rate=9_600, access="at_once", rate=5_000_000)
    slow.write(ROLL * 100, 0)
    slow.advance(100 * MS)
    assert slow.counts.dropped_at_bridge == 100 - QUEUE_FRAMES
    slow.advance(60 * S)
    assert slow.counts.frames_from_console == 100


def test_an_all_stop_waits_behind_what_the_console_has_handed_over() -> None:
    """The bridge knows no priorities: this is why a console must pace to the air."""
    slow = world(modules=1, air_rate=9_600, access="at_once", rate=5_000_000)
    stop = frame(encode(to_all(Stop(9))))
    slow.write(ROLL * 20 + stop, 0)
    air = Air(9_600, 1, listens=False)
    ahead_ns = 20 * air.airtime_ns(len(ROLL))
    slow.advance(ahead_ns)
    assert not slow.modules[0].latched
    slow.advance(ahead_ns + air.airtime_ns(len(stop)) + 400 * MS)
    assert slow.modules[0].latched or slow.counts.collided


def test_a_restart_in_the_middle_loses_what_waits() -> None:
    slow = world(modules=1, air_rate=9_600, access="at_once", rate=5_000_000)
    slow.write(frame(encode(to_all(Stop(9)))) * 30, 0)
    slow.at(60 * MS, slow.reset_bridge)
    slow.advance(10 * S)
    sent = slow.counts.frames_from_console
    assert sent == 30
    assert not slow.modules[0].latched or slow.modules[0].stop_number == 9
    slow.write(frame(encode(to_all(Stop(11)))), 11 * S)
    slow.advance(13 * S)
    assert slow.modules[0].stop_number == 11


STOP = frame(encode(to_all(Stop(9))))


@pytest.mark.parametrize("fault", ["reset_bridge", "silence_bridge"])
def test_what_waits_for_the_air_does_not_outlive_its_bridge(fault: str) -> None:
    """A roll call is on the air as it happens; the stops behind it are never sent."""
    slow = world(modules=1, air_rate=9_600, access="at_once", rate=5_000_000)
    slow.write(ROLL + STOP * 30, 0)
    slow.advance(10 * MS)
    assert slow._waiting == 31
    strike(slow, fault)
    assert slow._waiting == 1
    slow.advance(10 * S)
    assert not slow.modules[0].latched


@pytest.mark.parametrize("fault", ["reset_bridge", "silence_bridge", "unplug"])
def test_what_waits_for_the_line_does_not_outlive_its_bridge(fault: str) -> None:
    slow = world(modules=40, rate=1_200)
    slow.write(ROLL, 0)
    slow.read(S)
    assert slow._to_console.waiting(S) > 1_000
    strike(slow, fault)
    assert len(slow.read(S + BOOT_NS)) <= 1


@pytest.mark.parametrize("written_ns", [0, 50 * MS])
def test_what_is_written_before_or_while_the_cable_is_pulled_is_lost(written_ns: int) -> None:
    """Also where the line is so slow that it would still be under way once the cable is back."""
    slow = world(modules=1, rate=1_200)
    slow.at(10 * MS, lambda: slow.unplug(True))
    slow.at(100 * MS, lambda: slow.unplug(False))
    slow.write(STOP * 20, written_ns)
    slow.advance(10 * S)
    assert not slow.modules[0].latched
    slow.write(STOP, 10 * S)
    slow.advance(11 * S)
    assert slow.modules[0].latched


def test_a_question_to_the_bridge_takes_no_airtime() -> None:
    slow = world(modules=1, air_rate=9_600, access="at_once", rate=5_000_000)
    slow.write(ASK, 0)
    slow.advance(MS)
    assert slow._waiting == 0
    assert status(slow.read(2 * MS)).sequence == 7


def strike(struck: World, fault: str) -> None:
    """Let a fault of the bridge begin."""
    if fault == "reset_bridge":
        struck.reset_bridge()
    else:
        getattr(struck, fault)(True)


@pytest.mark.parametrize("kind", list(BridgeKind))
def test_a_fleet_is_commanded_through_either_bridge(kind: BridgeKind) -> None:
    console = VirtualConsole(world(bridge=kind, seed=3))
    assert len(console.call_roll()) == 8


def test_a_modem_lets_damage_through_to_the_modules() -> None:
    modem = world(modules=2, bridge=BridgeKind.TRANSPARENT)
    damaged = bytearray(ROLL)
    damaged[4] ^= 0x10
    modem.write(bytes(damaged), 0)
    modem.advance(S)
    counts = modem.counts
    assert (counts.dropped_at_bridge, counts.dropped_at_modules) == (0, 2)


def test_no_frame_is_lost_without_a_cause() -> None:
    """On a shared channel all that modules said is heard, collided, or still waits."""
    shared = world(modules=8, air_rate=100_000, access="at_once", rate=5_000_000, seed=5)
    data = shared.read(20 * S)
    shared.advance(20 * S + 500 * MS)
    heard = [each for each in FrameDecoder().feed(data) if isinstance(each, bytes)]
    telemetry = [m for m in (decode(each).message for each in heard) if isinstance(m, Telemetry)]
    counts = shared.counts
    said = sum(module._reporter._reports for module in shared.modules)
    assert 0 <= said - counts.frames_to_console - counts.collided <= 8
    assert telemetry
    assert counts.frames_from_console == 0


def test_a_shared_channel_has_one_history() -> None:
    def run() -> bytes:
        console = VirtualConsole(world(air_rate=60_000, loss=0.1, burst=3.0, seed=11))
        console.call_roll()
        console.run(5 * S)
        return console.raw

    first = run()
    assert first == run()
    assert len(first) > 1000


def test_out_of_range_nothing_is_heard(tmp_path: object) -> None:
    """The practice fleet stands metres from the bridge: well within 100 m, far beyond 10 cm."""
    near, far = (VirtualConsole(world(range_m=r, seed=2)) for r in (100.0, 0.1))
    assert len(near.call_roll()) == 8
    assert not far.call_roll()


def test_times_on_the_air_follow_each_other() -> None:
    shared = world(modules=3, air_rate=50_000, rate=5_000_000, seed=1)
    lengths = []
    for t_ms in range(0, 3000, 5):
        lengths.append(len(shared.read(t_ms * MS)))
    assert sum(lengths) > 0
    airtime_ns = Air(50_000, 1, listens=True).airtime_ns(40)
    busy = [i for i, length in enumerate(lengths) if length]
    assert all((later - sooner) * 5 * MS > airtime_ns / 2 for sooner, later in pairwise(busy))
