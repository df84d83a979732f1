"""The session's core against a simulated fleet in virtual time: laws 1, 3, 5 and 6."""

import pytest

from console.errors import InputError
from protocol.codes import Activity
from sim_link.options import SimOptions
from storage.records import BytesOut, EpochChosen, OrderGiven, OrderVoided, StopPressed
from storage.rows import CommandRow, MotionRow
from tests.support.virtual import SECOND_NS, VirtualSession

BAD_RADIO = SimOptions(seed=5, loss=0.2, damage=0.05, repeat=0.1, reorder=0.05, delay_ms=5)


def motions(session: VirtualSession) -> list[MotionRow]:
    """The last state of each motion's row."""
    rows = [row for row in session.log.rows if isinstance(row, MotionRow)]
    return list({row.command: row for row in rows}.values())


def opened(options: SimOptions | None = None) -> VirtualSession:
    """A session whose fleet of eight has answered in full."""
    session = VirtualSession(options)
    assert session.until_drivable()
    return session


def all_named(session: VirtualSession) -> bool:
    return all(module.kind and module.battery_V for module in session.view.modules)


def test_the_roll_brings_the_fleet() -> None:
    session = opened()
    names = [module.name for module in session.view.modules]
    assert sorted(names) == [
        "alder", "birch", "cedar", "elm", "hazel", "larch", "maple", "rowan",
    ]  # fmt: skip
    assert session.view.simulated


def test_the_roll_is_called_until_a_bad_radio_lets_everybody_through() -> None:
    session = VirtualSession(SimOptions(seed=3, loss=0.6))
    assert session.run_for(60, lambda: len(session.view.modules) == 8 and all_named(session))


def test_an_order_becomes_one_motion_and_one_row() -> None:
    session = opened()
    session.order("birch pivot forward at 5200")
    session.settle()
    session.run_for(1)
    [motion] = motions(session)
    assert motion.outcome == "landed"
    assert (motion.face_before, motion.face_after) == (1, 2)
    assert [entry.name for entry in session.tally] == ["birch"]


def test_a_command_is_committed_before_its_first_byte_is_sent() -> None:
    session = opened()
    session.log.held = []
    session.order("all pivot forward at 5200")
    session.run_for(2)
    before = [type(record) for _, record in session.log.records]
    assert session.tally == []
    [done] = session.log.held
    done("")
    session.settle()
    kinds = [type(record) for _, record in session.log.records]
    assert before.count(OrderGiven) == 1
    assert len(session.tally) == 8
    assert kinds.index(OrderGiven) < len(before)


def test_an_order_that_cannot_be_recorded_is_never_sent() -> None:
    session = opened()
    session.log.why_not = "the disk is full"
    session.order("birch pivot forward at 5200")
    session.run_for(3)
    assert session.tally == []
    assert not session.core.fleet.open_commands()
    [motion] = motions(session)
    assert motion.outcome == "refused"
    kinds = [type(record) for _, record in session.log.records]
    assert OrderGiven in kinds
    assert OrderVoided in kinds


def test_rest_does_not_wait_for_the_log() -> None:
    session = opened()
    session.order("birch spin at 3000 for 30 s")
    session.run_for(4)
    assert session.core.fleet.modules_by_name()["birch"].wheel_rpm > 2500
    session.log.held = []
    session.order("birch rest")
    session.run_for(10)
    assert session.log.held == []
    assert session.core.fleet.modules_by_name()["birch"].wheel_rpm == 0


def test_rest_takes_the_place_of_what_waits() -> None:
    session = opened()
    session.order("birch spin at 3000 for 30 s")
    session.order("birch pivot forward at 5200")
    session.run_for(2)
    session.order("birch rest")
    session.settle()
    session.run_for(10)
    assert [entry.motion for entry in session.tally] == ["spin", "rest"]
    [motion] = motions(session)
    assert motion.outcome == "cut"
    endings = {row.command: row.ending for row in session.log.rows if isinstance(row, CommandRow)}
    assert endings == {1: "cut", 2: "cut", 3: "finished"}


def test_rest_takes_the_place_of_what_the_log_still_writes() -> None:
    session = opened()
    session.log.held = []
    session.order("birch pivot forward at 5200")
    session.order("birch rest")
    session.log.held[0]("")
    session.settle()
    session.run_for(5)
    assert [entry.motion for entry in session.tally] == ["rest"]


def test_an_order_is_given_whole_or_not_at_all() -> None:
    session = opened()
    session.order("elm spin at 3000 for 30 s")
    session.run_for(2)
    with pytest.raises(InputError, match="elm"):
        session.order("birch, elm pivot forward at 5200")
    session.run_for(3)
    assert [entry.motion for entry in session.tally] == ["spin"]


def test_each_command_once_over_a_bad_radio() -> None:
    session = opened(BAD_RADIO)
    for _ in range(6):
        assert session.run_for(20, lambda: can_all_move(session))
        session.order("all pivot forward at 4350")
        session.settle()
    carried_out = [(entry.identity, entry.boot, entry.number) for entry in session.tally]
    assert len(carried_out) == 48
    assert len(set(carried_out)) == 48
    assert len(motions(session)) == 48
    rows = {row.command: row for row in session.log.rows if isinstance(row, CommandRow)}
    assert all(row.ending == "finished" and row.final for row in rows.values())
    assert sum(row.sends for row in rows.values()) > 48


def can_all_move(session: VirtualSession) -> bool:
    modules = session.view.modules
    return all(each.activity == Activity.STILL and each.face_up for each in modules)


def test_one_seed_gives_one_history() -> None:
    histories = []
    for _ in range(2):
        session = opened(BAD_RADIO)
        session.order("all pivot forward at 4350")
        session.settle()
        histories.append(session.log.records)
    assert histories[0] == histories[1]


def test_a_module_that_restarts_never_repeats_what_it_did() -> None:
    options = SimOptions.from_texts({"seed": 4, "fault": "restart_on_brake:maple"})
    session = opened(options)
    session.order("maple pivot forward at 5200")
    session.settle()
    session.run_for(5)
    assert len([entry for entry in session.tally if entry.name == "maple"]) == 1
    [motion] = motions(session)
    assert motion.outcome == "unseen"
    session.run_for(5)
    session.order("maple pivot forward at 5200")
    session.settle()
    assert len([entry for entry in session.tally if entry.name == "maple"]) == 2


def test_of_two_modules_with_one_address_neither_moves() -> None:
    session = VirtualSession(SimOptions.from_texts({"seed": 4, "fault": "same_address:cedar"}))
    session.run_for(5)
    names = [module.name for module in session.view.modules]
    assert {"birch", "cedar"} <= set(names)
    sharing = [module.name for module in session.view.modules if module.shares_address]
    assert sorted(sharing) == ["birch", "cedar"]
    assert any("address conflict" in text for _, text in session.view.notices)
    for name in sharing:
        with pytest.raises(InputError, match="another box answers at its address"):
            session.order(f"{name} pivot forward at 5200")
    session.order("alder pivot forward at 5200")
    session.settle()
    assert [entry.name for entry in session.tally] == ["alder"]


def test_all_stop_reaches_both_of_two_modules_with_one_address() -> None:
    session = VirtualSession(SimOptions.from_texts({"seed": 4, "fault": "same_address:cedar"}))
    session.run_for(5)
    session.core.stop_all("test", session.now_ns)
    assert session.run_for(10, lambda: not session.view.stop.missing)
    assert all(module.latched for module in session.view.modules)


def test_a_silent_module_ends_unseen() -> None:
    options = SimOptions.from_texts({"seed": 4, "fault": "silent:maple"})
    session = VirtualSession(options)
    session.run_for(3)
    assert "maple" in session.core.fleet.modules_by_name()
    session.order("maple flash")
    session.run_for(60)
    rows = {row.command: row for row in session.log.rows if isinstance(row, CommandRow)}
    [row] = rows.values()
    assert (row.ending, row.final) == ("unseen", 0)
    assert row.sends > 3


# -- all-stop ---------------------------------------------------------------------------------


def test_all_stop_rests_every_wheel_and_moves_nobody() -> None:
    session = opened(BAD_RADIO)
    faces = {module.name: module.face_up for module in session.view.modules}
    session.order("all spin at 4000 for 60 s")
    session.run_for(6)
    assert all(module.wheel_rpm > 3500 for module in session.view.modules)
    session.core.stop_all("test", session.now_ns)
    assert session.run_for(3, lambda: not session.view.stop.missing)
    assert session.view.stop.in_force
    assert session.run_for(60, lambda: all(m.wheel_rpm == 0 for m in session.view.modules))
    session.run_for(2)
    assert {module.name: module.face_up for module in session.view.modules} == faces
    assert [entry.motion for entry in session.tally] == ["spin"] * 8


def test_all_stop_goes_before_what_waits() -> None:
    session = opened()
    session.order("all pivot forward at 5200")
    session.run_for(0.0005)
    session.core.stop_all("test", session.now_ns)
    session.run_for(1)
    outs = [record for _, record in session.log.records if isinstance(record, BytesOut)]
    pressed = next(
        number for number, record in session.log.records if isinstance(record, StopPressed)
    )
    after = [number for number, record in session.log.records if isinstance(record, BytesOut)]
    assert outs
    first = min(number for number in after if number > pressed)
    record = dict(session.log.records)[first]
    assert isinstance(record, BytesOut)
    # a frame that holds a Stop is 6 header, 4 body, 4 check, 2 framing: by hand from WIRE.md
    assert len(record.data) == 16


def test_all_stop_ends_a_motion_that_spins_up_as_cut() -> None:
    session = opened()
    session.order("alder pivot forward at 5200")
    session.run_for(1)
    session.core.stop_all("test", session.now_ns)
    session.settle()
    session.run_for(1)
    [motion] = motions(session)
    assert motion.outcome == "cut"
    assert session.tally == []


def test_an_order_that_waits_for_the_log_is_erased_by_all_stop() -> None:
    session = opened()
    session.log.held = []
    session.order("alder pivot forward at 5200")
    session.core.stop_all("test", session.now_ns)
    session.log.held[0]("")
    session.run_for(5)
    assert session.tally == []
    [motion] = motions(session)
    assert motion.outcome == "cut"


def test_while_a_stop_is_in_force_nothing_moves_and_rest_is_still_taken() -> None:
    session = opened()
    session.core.stop_all("test", session.now_ns)
    session.run_for(2)
    with pytest.raises(InputError, match="all-stop"):
        session.order("alder pivot forward at 5200")
    session.order("all rest")
    session.settle()


def test_a_stop_outlasts_the_console_and_only_its_own_number_lifts_it() -> None:
    session = opened()
    session.core.stop_all("first", session.now_ns)
    session.run_for(2)
    session.core.stop_all("second", session.now_ns)
    session.run_for(2)
    session.reconnect(epoch=2_000_000)
    session.run_for(5)
    stop = session.view.stop
    assert (stop.in_force, stop.stop_number) == (True, 2)
    with pytest.raises(InputError, match="number 2"):
        session.core.lift_stop(1, "test", session.now_ns)
    session.core.lift_stop(2, "test", session.now_ns)
    session.run_for(3)
    assert not session.view.stop.in_force
    assert not any(module.latched for module in session.view.modules)
    session.order("alder pivot forward at 5200")
    session.settle()
    assert len(session.tally) == 1


def test_a_clear_with_nothing_to_clear_is_refused() -> None:
    session = opened()
    with pytest.raises(InputError, match="no all-stop"):
        session.core.lift_stop(0, "test", session.now_ns)


# -- epochs -----------------------------------------------------------------------------------


def test_a_console_with_an_older_clock_takes_a_newer_epoch() -> None:
    session = opened()
    session.reconnect(epoch=500)
    assert session.until_drivable()
    assert session.core.fleet.epoch == 1_000_001
    assert EpochChosen in [type(record) for _, record in session.log.records]
    session.order("birch pivot forward at 5200")
    session.settle()
    assert len(session.tally) == 1


def test_time_never_waits_longer_than_the_idle_time() -> None:
    session = opened()
    assert session.core.next_wake_ns(session.now_ns) <= session.now_ns + SECOND_NS // 2
