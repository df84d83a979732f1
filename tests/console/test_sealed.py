"""A sealed fleet: the whole core against sealed modules in virtual time (law 10)."""

from pathlib import Path

import pytest

from console.fleet import FleetReducer
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.frame import FrameDecoder, frame
from protocol.message import Clear, Packet, Stop, Telemetry, encode
from protocol.seal import KeyRing, Opened, Sealer, open_seal
from sim_link.options import SimOptions
from storage.records import BytesIn, BytesOut, FramesRefused
from tests.support.virtual import VirtualSession

KEY = bytes(range(32))
KEYS = KeyRing({0: KEY}, 0)


@pytest.fixture
def key_file(tmp_path: Path) -> Path:
    path = tmp_path / "keys.toml"
    path.write_text(f'[[key]]\nslot = 0\nhex = "{KEY.hex()}"\n')
    return path


def sealed_session(key_file: Path, **more: object) -> VirtualSession:
    options = SimOptions(seed=5, keys=key_file, **more)  # type: ignore[arg-type]
    return VirtualSession(options, keys=KEYS)


def ready(session: VirtualSession) -> VirtualSession:
    assert session.until_drivable()
    return session


def sealed(data: bytes) -> bool:
    [payload] = FrameDecoder().feed(data)
    return isinstance(payload, bytes) and isinstance(open_seal(KEYS, payload), Opened)


def test_orders_are_carried_out_over_a_bad_radio(key_file: Path) -> None:
    radio = {"loss": 0.2, "damage": 0.05, "repeat": 0.1, "reorder": 0.1, "delay_ms": 5.0}
    session = ready(sealed_session(key_file, **radio))
    assert session.view.sealed
    session.order("all pivot forward at 5200")
    session.settle()
    assert len(session.tally) == 8
    outs = [record.data for _, record in session.log.records if isinstance(record, BytesOut)]
    assert all(sealed(data) for data in outs)  # nothing goes out unsealed


def test_a_console_without_the_key_sees_nobody_and_moves_nobody(key_file: Path) -> None:
    session = VirtualSession(SimOptions(seed=5, keys=key_file))
    session.run_for(5)
    assert session.view.modules == ()
    session.core.stop_all("test", session.now_ns)
    session.run_for(2)
    assert not any(module.latched for module in session.world.modules)


def test_a_console_with_a_key_sees_no_unsealed_fleet(key_file: Path) -> None:
    session = VirtualSession(SimOptions(seed=5), keys=KEYS)
    session.run_for(5)
    assert session.view.modules == ()
    assert session.view.links[0].dropped > 20
    faults = {
        fault
        for _, record in session.log.records
        if isinstance(record, FramesRefused)
        for fault in record.faults
    }
    assert faults == {"unsealed"}


def test_forged_frames_are_dropped_at_both_ends(key_file: Path) -> None:
    session = ready(sealed_session(key_file))
    stranger = Sealer(KeyRing({0: bytes(32)}, 0), 4_000_000_000)
    stop = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Stop(99)))
    for forged in (stop, stranger.seal(stop)):
        session.world.write(frame(forged), session.now_ns)
    dropped = session.view.links[0].dropped
    lie = Telemetry(1, 1, 1, 0, 0, 1, 0, 3000, 0, 0, 1)
    for forged in (encode(Packet(CONSOLE_ADDRESS, 0x10, lie)),) * 2:
        session.core.arrived(0, frame(stranger.seal(forged)), session.now_ns)
        session.core.arrived(0, frame(forged), session.now_ns)
    session.run_for(2)
    assert not any(module.latched for module in session.world.modules)
    assert session.world.counts.dropped_at_modules >= 16
    assert session.view.links[0].dropped == dropped + 4


def test_replayed_bytes_of_the_console_do_nothing_twice(key_file: Path) -> None:
    session = ready(sealed_session(key_file))
    session.order("birch pivot forward at 5200")
    session.settle()
    session.core.stop_all("test", session.now_ns)
    session.run_for(3)
    session.core.lift_stop(1, "test", session.now_ns)
    session.run_for(3)
    recorded = [record.data for _, record in session.log.records if isinstance(record, BytesOut)]
    before = list(session.tally)
    for data in recorded:
        session.world.write(data, session.now_ns)
        session.run_for(0.05)
    session.run_for(5)
    assert session.tally == before


def test_a_recorded_clear_does_not_lift_a_later_repeat_of_its_stop(key_file: Path) -> None:
    session = ready(sealed_session(key_file))
    session.core.stop_all("test", session.now_ns)
    session.run_for(3)
    first = len(session.log.records)
    session.core.lift_stop(1, "test", session.now_ns)
    session.run_for(3)
    clears = [r.data for _, r in session.log.records[first:] if isinstance(r, BytesOut)]
    session.core.stop_all("again", session.now_ns)
    session.run_for(3)
    for data in clears:
        session.world.write(data, session.now_ns)
        session.run_for(0.05)
    assert all(module.latched for module in session.world.modules)


def test_restarts_of_module_and_console_lose_nothing(key_file: Path) -> None:
    session = ready(sealed_session(key_file))
    for module in session.world.modules:
        module.restart(session.now_ns)
    session.run_for(5)
    session.core.stop_all("test", session.now_ns)
    session.run_for(3)
    session.reconnect(epoch=1_000_050)
    ready(session)
    session.run_for(2)
    assert session.view.stop.in_force
    session.core.lift_stop(1, "test", session.now_ns)
    session.run_for(3)
    assert not any(module.latched for module in session.world.modules)
    session.order("all pivot forward at 5200")
    session.settle()
    assert len(session.tally) == 8


def test_a_module_that_restarted_unseen_is_still_cleared(key_file: Path) -> None:
    session = ready(sealed_session(key_file))
    session.core.stop_all("test", session.now_ns)
    session.run_for(3)
    session.world.modules[0].restart(session.now_ns)
    session.core.lift_stop(1, "test", session.now_ns)
    session.run_for(5)
    assert not any(module.latched for module in session.world.modules)
    assert not session.view.stop.in_force


def test_an_older_clock_is_mended_by_a_newer_epoch(key_file: Path) -> None:
    session = ready(sealed_session(key_file))
    session.reconnect(epoch=500)
    ready(session)
    assert session.core.fleet.epoch == 1_000_001
    session.order("birch pivot forward at 5200")
    session.settle()
    assert len(session.tally) == 1


def test_a_replay_without_the_key_ends_in_the_same_state(key_file: Path) -> None:
    session = ready(sealed_session(key_file, loss=0.2, damage=0.1, repeat=0.2))
    session.order("all pivot forward at 4350")
    session.settle()
    session.core.arrived(0, frame(encode(Packet(CONSOLE_ADDRESS, 0x10, Stop(1)))), session.now_ns)
    fleet, rows = FleetReducer(), []
    for number, record in session.log.records:
        rows += fleet.apply(number, record).rows
    assert fleet.view(session.now_ns) == session.view
    assert rows == session.log.rows
    assert any(isinstance(record, FramesRefused) for _, record in session.log.records)
    assert any(isinstance(record, BytesIn) for _, record in session.log.records)


def test_no_record_holds_the_key(key_file: Path) -> None:
    session = ready(sealed_session(key_file))
    session.order("all rest")
    session.settle()
    told = repr(session.log.records) + repr(session.log.rows)
    assert KEY.hex() not in told
    assert repr(KEY)[2:-1] not in told


def test_a_clear_reaches_nobody_who_was_not_shown_a_boot_number(key_file: Path) -> None:
    """The module's rule, seen from outside: an authentic clear alone is not fresh."""
    session = sealed_session(key_file)
    sealer = Sealer(KEYS, 900_000)
    for message in (Stop(1), Clear(1)):
        payload = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, message))
        session.world.write(frame(sealer.seal(payload)), session.now_ns)
        session.world.advance(session.now_ns + 100_000_000)
        session.now_ns += 100_000_000
    assert all(module.latched for module in session.world.modules)
