"""The whole simulated fleet in virtual time: outcomes, determinism, at most once, all-stop."""

import hashlib
from collections import Counter
from pathlib import Path

import pytest

from protocol.clock import ModuleClock
from protocol.codes import (
    BRIDGE_ADDRESS,
    CONSOLE_ADDRESS,
    FIRST_GROUP_ADDRESS,
    Activity,
    AnswerState,
    Reason,
    SettingId,
    identity_bits,
)
from protocol.frame import frame
from protocol.message import (
    Answer,
    BridgeAsk,
    BridgeStatus,
    Clear,
    Echo,
    Facts,
    Nameplate,
    Packet,
    Release,
    RollCall,
    SettingWrite,
    Stop,
    Stopped,
    Telemetry,
    encode,
)
from sim_link.errors import SimInputError
from sim_link.options import Fault, FaultKind, SimOptions
from sim_link.tally import TallyEntry
from sim_link.world import World
from tests.support.virtual_console import (
    CONSOLE,
    EPOCH,
    MS,
    S,
    VirtualConsole,
    pivot,
    rest,
    spin,
    to_all,
    to_module,
    told,
)

PAVERS, PEBBLES = (0x10, 0x12, 0x14, 0x16), (0x11, 0x13, 0x15, 0x17)
GOLDEN = "df0dfca4a0af92cc31a13c30c65281095246c3c759c75843354c8301c9b5dcf5"
BAD_RADIO = {"loss": 0.2, "damage": 0.05, "repeat": 0.3, "reorder": 0.2, "delay_ms": 20.0}


def console(**options: object) -> VirtualConsole:
    return VirtualConsole(World(SimOptions(**options)))  # type: ignore[arg-type]


def facts_of(host: VirtualConsole, address: int, number: int) -> Facts:
    (facts,) = (m for m in host.replies(address, number) if isinstance(m, Facts))
    return facts


def test_everyone_answers_the_roll_call() -> None:
    host = console(seed=7)
    assert set(host.call_roll()) == set(range(0x10, 0x18))
    plates = [p.message for p in host.heard if isinstance(p.message, Nameplate)]
    assert len(plates) == 8


def test_a_fleet_lands_falls_short_and_goes_over_where_it_should() -> None:
    host = console(seed=7)
    present = host.call_roll()
    for number, speed_rpm in enumerate((3600, 5200, 8900), 1):
        for address, presence in present.items():
            host.say(to_module(pivot(presence, number, speed_rpm), address))
        host.run(10 * S)
    faces = {
        number: Counter(
            (facts.face_after - facts.face_before) % 4
            for facts in (facts_of(host, address, number) for address in present)
        )
        for number in (1, 2, 3)
    }
    assert faces[1] == {0: 8}
    assert faces[2] == {1: 8}
    assert faces[3] == {1: 4, 2: 4}
    over = [facts_of(host, address, 3).turned_ddeg for address in PEBBLES]
    assert all(turned == pytest.approx(1800, abs=40) for turned in over)


def history(seed: int, **options: object) -> str:
    """Run one scripted sitting and return the digest of every byte the console got."""
    host = console(seed=seed, **BAD_RADIO, **options)
    present = host.call_roll()
    for number in (1, 2):
        for address in sorted(present):
            host.say(to_module(pivot(present[address], number, 4300), address))
        host.run(3 * S)
        host.say(to_all(Stop(number)))
        host.run(2 * S)
        host.say(to_all(Clear(number)))
    return hashlib.sha256(host.raw).hexdigest()


def test_one_seed_one_history_byte_for_byte() -> None:
    assert history(5) == history(5)


def golden() -> bytes:
    """Half a minute of the practice fleet over a bad, shared channel, with motions of every sort
    that it can do, faults and wear on the way: all bytes that reach the console."""
    faults = Fault(FaultKind.RESTART, "cedar", 9 * S), Fault(FaultKind.AGEING_CELL, "alder")
    bad = {"loss": 0.05, "burst": 2.0, "repeat": 0.05, "spread_ms": 3.0, "air_rate": 250_000}
    talk = console(seed=20, fault=faults, **bad)
    present = talk.call_roll()
    talk.run(S)
    for number, address in enumerate(sorted(present), 1):
        talk.say(to_module(pivot(present[address], number, 5200), address))
    talk.run(12 * S)
    for number, address in enumerate(sorted(present), 20):
        talk.say(to_module(spin(present[address], number), address))
    talk.run(17 * S)
    return talk.raw


def test_the_history_of_one_seed_is_the_one_that_it_always_was() -> None:
    """A golden digest: any change of a byte in it is a change of the simulator's behaviour, which
    is to be meant, and noted. The last digits of a sine differ between processors, but bytes on the
    wire are rounded to far coarser units."""
    raw = golden()
    assert len(raw) > 10_000
    assert hashlib.sha256(raw).hexdigest() == GOLDEN


def test_another_seed_is_another_history() -> None:
    assert len({history(seed) for seed in (5, 6, 7)}) == 3


def test_reading_more_often_changes_nothing() -> None:
    raws = []
    for step_ms in (1, 7, 333):
        host = console(seed=3, **BAD_RADIO)
        host.say(to_all(RollCall(EPOCH, CONSOLE)))
        host.run(4 * S, step_ms * MS)
        raws.append(host.raw)
    assert raws[0] == raws[1] == raws[2]


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_at_most_once_over_a_bad_radio(seed: int) -> None:
    tally: list[TallyEntry] = []
    options = SimOptions(
        seed=seed, fault=(Fault(FaultKind.RESTART_ON_BRAKE, "maple"),), **BAD_RADIO
    )
    host = VirtualConsole(World(options, tally.append))
    for _ in range(8):
        host.call_roll()
    boots = {address: presence.boot for address, presence in host.present.items()}
    for number in range(1, 6):
        for _ in range(6):  # each command again and again, as a console with no patience
            for address, presence in host.present.items():
                first = presence._replace(boot=boots[address])
                host.say(to_module(pivot(first, number), address))
            host.run(700 * MS)
    host.run(10 * S)
    counts = Counter((entry.identity, entry.boot, entry.number) for entry in tally)
    assert set(counts.values()) == {1}
    # The restarted one took nothing more under its old boot number; the others did nearly all.
    maple = Counter(entry.name for entry in tally)["maple"]
    assert maple == 1
    assert len(tally) > 30
    assert {entry.motion for entry in tally} == {"pivot"}


def test_every_motion_that_moved_a_body_is_in_the_tally() -> None:
    tally: list[TallyEntry] = []
    host = VirtualConsole(World(SimOptions(seed=2, repeat=1.0, reorder=0.5), tally.append))
    present = host.call_roll()
    for number in (1, 2, 3):
        for address in PAVERS:
            host.say(to_module(pivot(present[address], number, 5500), address))
        host.run(6 * S)
    for module in host.world.modules:
        moved = round(module.drive.body.turned_rad / 1.5707963)
        assert moved == sum(entry.identity == module.spec.identity for entry in tally)


@pytest.mark.parametrize("wait_ms", [1, 300, 900, 1500])
def test_all_stop_rests_every_wheel_and_moves_nobody(wait_ms: int) -> None:
    host = console(seed=4)
    present = host.call_roll()
    before = [module.drive.body.posture(host.t_ns) for module in host.world.modules]
    for address, presence in present.items():
        if address in PAVERS:
            host.say(to_module(pivot(presence, 1, 9000), address))
        else:
            host.say(to_module(spin(presence, 1, -6000, 60_000), address))
    host.run(wait_ms * MS)
    host.say(to_all(Stop(1)))
    host.run(8 * S)
    confirmed = {p.source for p in host.heard if isinstance(p.message, Stopped)}
    assert confirmed == set(present)
    for module, posture in zip(host.world.modules, before, strict=True):
        assert module.drive.activity is Activity.STILL
        assert module.drive.wheel.speed_rad_s(host.t_ns) == 0.0
        assert module.drive.body.posture(host.t_ns) == posture
        assert module.drive.body.turned_rad == 0.0
    for address in PAVERS:
        assert facts_of(host, address, 1).reason == Reason.STOPPED
    for address in PEBBLES:
        assert host.replies(address, 1)[-1].state == AnswerState.CUT  # type: ignore[union-attr]


def test_a_broadcast_reaches_each_module_by_its_own_luck() -> None:
    host = console(seed=1, modules=40, loss=0.5)
    host.say(to_all(Stop(1)))
    host.run(S)
    latched = sum(module.latched for module in host.world.modules)
    assert 8 <= latched <= 32


def test_rest_beside_a_motion_is_answered_with_both_ends() -> None:
    host = console(seed=1)
    present = host.call_roll()
    host.say(to_module(pivot(present[0x10], 1, 8000), 0x10))
    host.run(500 * MS)
    host.say(to_module(rest(present[0x10], 2), 0x10))
    host.run(5 * S)
    assert facts_of(host, 0x10, 1).reason == Reason.RESTED
    states = [m.state for m in host.replies(0x10, 2) if isinstance(m, Answer)]
    assert states == [AnswerState.ACCEPTED, AnswerState.FINISHED]


def test_faults_show_on_the_wire() -> None:
    faults = (Fault(FaultKind.SILENT, "birch"), Fault(FaultKind.LOW_BATTERY, "elm"))
    host = console(seed=1, fault=faults)
    present = host.call_roll()
    host.run(5 * S)
    talkers = {p.source for p in host.heard if isinstance(p.message, Telemetry)}
    assert 0x11 in present
    assert 0x11 not in {p.source for p in host.run(5 * S)}
    assert {0x10, 0x13} <= talkers
    host.say(to_module(pivot(present[0x13], 1), 0x13))
    host.run(S)
    (answer,) = host.replies(0x13, 1)
    assert isinstance(answer, Answer)
    assert answer.reason == Reason.BATTERY_LOW


def test_the_line_paces_both_ways() -> None:
    # 9,600 baud: 960 bytes a second. The roll call of 22 bytes takes 23 ms to the bridge, and
    # nothing of the answers is across before.
    host = console(seed=7, rate=9600)
    call = frame(encode(to_all(RollCall(EPOCH, CONSOLE))))
    host.world.write(call, 0)
    assert host.world.unsent(0) == len(call)
    across_ns = len(call) * 10 * S // 9600
    assert host.world.read(across_ns) == b""
    assert host.world.unsent(across_ns + MS) == 0
    got = len(host.world.read(across_ns + 300 * MS))
    assert got == pytest.approx(0.3 * 960, abs=2)


def test_what_is_unsent_can_be_dropped() -> None:
    host = console(seed=7, rate=1200)
    host.world.write(frame(encode(to_all(RollCall(EPOCH, CONSOLE)))), 0)
    host.world.discard_unsent(10 * MS)
    assert host.world.unsent(10 * MS) <= 1
    host.run(3 * S)
    assert host.present == {}


def test_noise_on_the_line_is_dropped_and_the_next_frame_heard() -> None:
    host = console(seed=7)
    host.world.write(b"\x05rubbish\x00" + bytes(range(1, 200)) + b"\0", 0)
    assert len(host.call_roll()) == 8
    assert host.world.counts.dropped_at_bridge == 2


def test_good_frames_that_mean_nothing_are_dropped() -> None:
    host = console(seed=7)
    host.world.write(frame(b"\x09\x01\xff\xff\x01\x00"), 0)  # another wire version
    host.world.write(frame(b"\x01\x01\xff"), 0)  # too short for a header
    host.say(to_module(RollCall(EPOCH, CONSOLE), 0x99))  # nobody's address
    host.run(100 * MS)
    assert host.present == {}
    assert host.world.counts.dropped_at_bridge == 1
    assert host.world.counts.dropped_at_modules == 8  # a bridge reads no more than the header


def test_damage_is_counted_where_it_is_noticed() -> None:
    host = console(seed=7, damage=1.0)
    host.call_roll()
    host.run(2 * S)
    assert host.world.counts.dropped_at_modules > 0
    assert host.heard == []
    assert host.world.counts.frames_to_console > 0


def test_next_event_is_never_in_the_past_and_always_comes() -> None:
    world = World(SimOptions(seed=9, delay_ms=30.0))
    t_ns = 0
    for _ in range(300):
        due_ns = world.next_event_ns
        assert due_ns is not None
        assert due_ns >= t_ns
        t_ns = due_ns
        world.read(t_ns)
    assert t_ns > 5 * S


def test_time_does_not_run_backwards() -> None:
    host = console(seed=7)
    host.run(5 * S)
    before = len(host.heard)
    assert host.world.read(S) == b""
    host.say(to_all(RollCall(EPOCH, CONSOLE)))
    host.run(S)
    assert len(host.heard) > before


def test_a_thousand_modules_all_answer_one_roll_call() -> None:
    host = console(modules=1000, seed=1)
    host.say(to_all(RollCall(EPOCH, CONSOLE)))
    host.run(3 * S, 50 * MS)
    plates = {p.source for p in host.heard if isinstance(p.message, Nameplate)}
    assert len(plates) == 1000
    assert host.world.counts.dropped_at_bridge == 0


def test_a_thousand_modules_each_keep_their_time() -> None:
    world = World(SimOptions(seed=1, modules=1000))
    assert len(world.modules) == 1000
    world.advance(2 * S)
    reports = [module.next_wake_ns for module in world.modules]
    assert all(2 * S < report_ns <= 2 * S + 500 * MS for report_ns in reports)


def test_bad_fleets_and_faults_are_refused_before_anything_runs() -> None:
    with pytest.raises(SimInputError, match="no such module"):
        World(SimOptions(fault=(Fault(FaultKind.SILENT, "bob"),)))


def test_the_bridge_says_how_it_is_and_passes_the_question_to_nobody() -> None:
    host = VirtualConsole(World(SimOptions(seed=3)))
    host.call_roll()
    host.say(Packet(BRIDGE_ADDRESS, CONSOLE_ADDRESS, BridgeAsk(77)))
    [packet] = [each for each in host.run(S) if isinstance(each.message, BridgeStatus)]
    status = packet.message
    assert isinstance(status, BridgeStatus)
    assert (packet.source, status.sequence) == (BRIDGE_ADDRESS, 77)
    counts = host.world.counts
    assert 0 < status.frames_to_console <= counts.frames_to_console
    assert status.frames_from_console == counts.frames_from_console
    assert status.queue <= status.queue_most
    assert abs(status.uptime_ms - host.t_ns // MS) < 1_100


def test_the_bridge_knows_the_most_that_was_ever_on_its_way() -> None:
    """Also where nobody asked at that moment: a roll call to 40 boxes at once."""
    host = VirtualConsole(World(SimOptions(seed=3, modules=40, delay_ms=30.0)))
    host.call_roll()
    host.run(2 * S)
    host.say(Packet(BRIDGE_ADDRESS, CONSOLE_ADDRESS, BridgeAsk(1)))
    [status] = [p.message for p in host.run(S) if isinstance(p.message, BridgeStatus)]
    assert status.queue_most >= 40 > status.queue


def test_a_frame_to_a_group_is_obeyed_by_its_members_alone() -> None:
    host = console(seed=3)
    present = dict(host.call_roll())
    for address, groups in ((0x11, 0b101), (0x15, 0b100), (0x16, 0b001)):
        me = present[address]
        envelope = (EPOCH, me.boot, 1, identity_bits(me.identity))
        host.say(to_module(SettingWrite(*envelope, SettingId.GROUPS, groups), address))
    host.run(S)
    host.say(to_module(Stop(4), FIRST_GROUP_ADDRESS + 2))
    host.run(S)
    assert {p.source for p in host.heard if isinstance(p.message, Stopped)} == {0x11, 0x15}
    latched = {each.spec.address for each in host.world.modules if each.latched}
    assert latched == {0x11, 0x15}


def test_two_consoles_on_one_line_the_second_waits_for_the_first_to_let_go() -> None:
    host = console(seed=3)
    host.call_roll()
    host.say(to_all(RollCall(EPOCH + 1, CONSOLE + 1)))
    host.run(S)
    told = host.present.values()
    assert {(each.epoch, each.console) for each in told} == {(EPOCH, CONSOLE)}
    assert all(each.owner_left_ms > 3_000 for each in told)
    other = spin(host.present[0x10], 1)._replace(epoch=EPOCH + 1)
    host.say(to_module(other, 0x10))
    host.run(S)
    [refused] = host.replies(0x10, 1)
    assert isinstance(refused, Answer)
    assert refused.reason == Reason.OWNED
    host.say(to_all(Release(CONSOLE)))
    host.say(to_all(RollCall(EPOCH + 1, CONSOLE + 1)))
    host.run(S)
    told = host.present.values()
    assert {(each.epoch, each.console) for each in told} == {(EPOCH + 1, CONSOLE + 1)}


def test_every_module_s_clock_runs_a_little_differently_and_the_same_each_time() -> None:
    def drifts_ppm(seed: int) -> list[float]:
        hour_us = 3_600_000_000
        found = [
            each.box.boot.time.us(hour_us * 1_000) for each in console(seed=seed).world.modules
        ]
        return [(us - hour_us) / 3_600 for us in found]

    drifts = drifts_ppm(3)
    assert len({round(each, 2) for each in drifts}) == 8
    assert all(abs(each) <= 40.0 for each in drifts)
    assert min(drifts) < -5.0 < 5.0 < max(drifts)
    assert drifts == drifts_ppm(3) != drifts_ppm(4)


def test_a_bridge_without_keys_answers_nothing_in_a_sealed_fleet(tmp_path: Path) -> None:
    keys = tmp_path / "keys.toml"
    keys.write_text(f"[[key]]\nslot = 0\nhex = '{'ab' * 32}'\n")
    host = VirtualConsole(World(SimOptions(seed=3, keys=keys)))
    host.say(Packet(BRIDGE_ADDRESS, CONSOLE_ADDRESS, BridgeAsk(77)))
    host.run(100 * MS)
    assert host.heard == []


def test_a_drifting_clock_is_found_within_its_bound() -> None:
    """Probe and Echo over a delayed radio, reduced as RFC 5905 section 8 has it."""
    host = VirtualConsole(World(SimOptions(seed=3, delay_ms=4.0)))
    present = host.call_roll()[0x12]
    module = next(each for each in host.world.modules if each.spec.address == 0x12)
    clock = ModuleClock(2_000)
    for sequence in range(20):
        t1_ns = host.t_ns
        host.say(to_module(told(present, 0)._replace(sequence=sequence), 0x12))
        while not (echoes := [each for each in host.run(MS, MS) if type(each.message) is Echo]):
            pass
        echo = echoes[0].message
        assert isinstance(echo, Echo)
        assert (echo.sequence, echo.held_us) == (sequence, 0)
        clock.sample(t1_ns, echo.received_us * 1_000, echo.received_us * 1_000, host.t_ns)
        host.run(2 * S)
    truth_ns = module.box.boot.time.us(host.t_ns) * 1_000 - host.t_ns
    assert abs(clock.offset_ns(host.t_ns) - truth_ns) <= clock.bound_ns(host.t_ns)
    drift_ppm = (module.box.boot.time._rate - 1.0) * 1e6
    assert 1.0 < abs(drift_ppm) <= 40.0
