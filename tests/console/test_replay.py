"""Replay and rebuild: the player's time, its stops on the way, and the same end as live."""

import sqlite3
from collections.abc import Sequence
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from console.errors import InputError, LogError
from console.fleet import FleetReducer
from console.replay import BURST_RECORDS, ReplayPlayer, fold_rows, rebuild_session
from console.view import FleetView
from protocol.codes import BRIDGE_ADDRESS, AnswerState
from storage.errors import StorageMisuseError
from storage.reader import LogReader
from storage.records import (
    BytesIn,
    CommandExpired,
    LinkChanged,
    Record,
    Remark,
    SessionClosed,
    SessionOpened,
    StageStarted,
    StopLifted,
    StopPressed,
)
from storage.rows import TABLES
from storage.writer import LogWriter
from tests.support.module_words import (
    bridge_status,
    echo,
    fault,
    lock_state,
    probe,
    settings_read,
    upkeep,
)
from tests.support.wire_script import (
    BOOT,
    EPOCH,
    STEP_NS,
    Script,
    answer,
    facts,
    from_module,
    nameplate,
    pivot,
    planned,
    presence,
    stopped,
    tables_of,
    telemetry,
)

SECOND = 1_000_000_000


def session() -> Script:
    """A short session with a pivot, a stop and its clear, a restart and an unseen command."""
    script = Script().open().heard(presence(), nameplate()).heard(telemetry(1), telemetry(2))
    script.order(planned(1)).sent(pivot(1)).heard(answer(1, AnswerState.ACCEPTED)).heard(facts(1))
    script.add(StopPressed, 1, "key")
    script.heard(stopped(1))
    script.add(StopLifted, 1, "key")
    script.heard(stopped(1, latched=0))
    upkeep(script, 1).heard(*settings_read()).heard(lock_state(), fault(1, 50))
    script.heard(lock_state(""), fault(0, 90)).sent(probe(2)).heard(echo(2, 9_000))
    script.heard(bridge_status(2, 10), address=BRIDGE_ADDRESS)
    script.order(planned(2, stage=4)).sent(pivot(2))
    script.add(StageStarted, 2, 4000)
    script.add(CommandExpired, 2)
    script.heard(presence(boot=BOOT + 1)).heard(telemetry(3, boot=BOOT + 1, wheel_rpm=77))
    script.add(Remark, "2026-03-04T09:05:00Z", "R. Ode", "the end")
    script.add(SessionClosed, "2026-03-04T10:00:00Z", "closed")
    return script


def every_second(count: int) -> list[tuple[int, Record]]:
    """A session of so many records, one a second, beginning at second 100."""
    records: list[Record] = [
        SessionOpened(100 * SECOND, "2026-03-04T09:00:00Z", "R. Ode", EPOCH, 1.0, "test"),
        BytesIn(101 * SECOND, 0, from_module(presence())),
    ]
    for second in range(2, count):
        data = from_module(telemetry(second, wheel_rpm=second))
        records.append(BytesIn((100 + second) * SECOND, 0, data))
    return list(enumerate(records, 1))


def wheel(player: ReplayPlayer) -> int:
    """Wheel speed shown: the second at which the newest record came."""
    return player.view().modules[0].wheel_rpm


def live_views(records: Sequence[tuple[int, Record]]) -> list[FleetView]:
    """The pictures that a live session showed at each record."""
    reducer = FleetReducer()
    views = []
    for number, record in records:
        reducer.apply(number, record)
        views.append(reducer.view(record.t_ns))
    return views


# -- time --------------------------------------------------------------------------------


def test_it_begins_paused_before_the_first_record() -> None:
    player = ReplayPlayer(iter(every_second(10)))
    assert (player.position_ns, player.length_ns) == (0, 9 * SECOND)
    assert not player.playing
    assert not player.ended
    assert player.view().modules == ()
    assert not player.advance(50 * SECOND)
    assert player.view().modules == ()


def test_playing_follows_the_time_it_is_given() -> None:
    player = ReplayPlayer(every_second(10))
    player.play()
    player.advance(7_000 * SECOND)  # takes the time, whatever it counts from
    assert player.position_ns == 0
    player.advance(7_002 * SECOND)
    assert (player.position_ns, wheel(player)) == (2 * SECOND, 2)
    player.advance(7_004 * SECOND + SECOND // 2)
    assert (player.position_ns, wheel(player)) == (4 * SECOND + SECOND // 2, 4)
    assert player.view().t_ns == 104 * SECOND + SECOND // 2


@pytest.mark.parametrize(("speed", "shown"), [(0.5, 4), (1.0, 8), (4.0, 32)])
def test_speed_scales_it(speed: float, shown: int) -> None:
    player = ReplayPlayer(every_second(60))
    player.set_speed(speed)
    player.play()
    for second in range(9):
        player.advance(second * SECOND)
    assert player.speed == speed
    assert wheel(player) == shown


@pytest.mark.parametrize("speed", [0.0, -1.0, 1e9, float("nan")])
def test_a_speed_that_is_none_is_refused(speed: float) -> None:
    player = ReplayPlayer(every_second(3))
    with pytest.raises(InputError, match=r"expected 0\.01 to 1000"):
        player.set_speed(speed)
    assert player.speed == 1.0


def test_a_pause_holds_and_does_not_count() -> None:
    player = ReplayPlayer(every_second(20))
    player.toggle()
    player.advance(0)
    player.advance(3 * SECOND)
    player.toggle()
    assert not player.playing
    player.advance(9 * SECOND)
    assert wheel(player) == 3
    player.toggle()
    player.advance(100 * SECOND)
    player.advance(101 * SECOND)
    assert wheel(player) == 4


def test_a_clock_that_goes_back_moves_nothing() -> None:
    player = ReplayPlayer(every_second(20))
    player.play()
    player.advance(10 * SECOND)
    player.advance(5 * SECOND)
    assert player.position_ns == 0
    player.advance(8 * SECOND)
    assert wheel(player) == 3


def test_it_stops_at_the_end_and_plays_again_from_the_beginning() -> None:
    player = ReplayPlayer(every_second(10))
    player.play()
    player.advance(0)
    assert player.advance(1000 * SECOND)
    assert player.ended
    assert not player.playing
    assert (player.position_ns, wheel(player)) == (player.length_ns, 9)
    player.toggle()
    assert player.playing
    assert (player.position_ns, player.ended) == (0, False)
    assert player.view().modules == ()


def test_a_long_gap_is_folded_in_bursts() -> None:
    """A screen that was away for long does not freeze at its return."""
    opened = SessionOpened(0, "2026-03-04T09:00:00Z", "R. Ode", EPOCH, 1.0, "test")
    many = [(1, opened)] + [(n, BytesIn(n, 0, b"\1")) for n in range(2, BURST_RECORDS + 100)]
    player = ReplayPlayer(many)
    player.play()
    player.advance(0)
    player.advance(SECOND)
    assert not player.ended
    assert player.position_ns == BURST_RECORDS + 1  # the first record came at time 0
    player.advance(SECOND)
    player.advance(SECOND + 1)
    player.advance(SECOND + 200)
    assert player.ended
    assert player.view().links[0].bytes_in == BURST_RECORDS + 98


def test_records_slightly_out_of_time_are_played_to_the_end() -> None:
    """Bytes carry the time of their reading, and may be recorded after something newer."""
    records = every_second(4)
    late = BytesIn(102 * SECOND, 0, from_module(telemetry(40, wheel_rpm=40)))
    player = ReplayPlayer([*records, (5, late)])
    assert player.length_ns == 3 * SECOND
    player.play()
    player.advance(0)
    player.advance(3 * SECOND)
    assert player.ended
    assert wheel(player) == 40


def test_no_records_at_all_is_an_end_and_not_an_error() -> None:
    player = ReplayPlayer([])
    player.play()
    assert player.ended
    assert not player.playing
    assert not player.step()
    assert not player.next_fault()
    assert (player.length_ns, player.position_ns, player.view().modules) == (0, 0, ())


# -- stops on the way --------------------------------------------------------------------


def test_a_step_goes_to_the_next_record_with_something_to_see() -> None:
    script = Script().open()
    script.add(BytesIn, 0, b"\0")
    script.heard(presence())
    script.add(BytesIn, 0, b"\0")
    script.heard(telemetry(1))
    player = ReplayPlayer(script.records)
    player.play()
    positions = []
    while player.step():
        positions.append(player.position_ns // STEP_NS)
    assert positions == [1, 3, 5]  # the link, the presence, the telemetry
    assert player.ended
    assert not player.playing


def test_faults_are_jumped_to_one_by_one() -> None:
    player = ReplayPlayer(session().records)
    assert player.next_fault()
    assert player.view().stop.in_force
    assert player.view().modules[0].boot == BOOT
    assert player.next_fault()  # the clear on the way is no fault
    assert player.view().modules[0].boot == BOOT + 1
    assert player.view().modules[0].wheel_rpm == 0
    assert not player.next_fault()
    assert player.ended


def test_a_lost_link_is_a_fault() -> None:
    script = Script().open().heard(presence())
    script.add(LinkChanged, 0, "sim://", "lost", "unplugged")
    script.heard(telemetry(1))
    player = ReplayPlayer(script.records)
    assert player.next_fault()
    assert player.view().links[0].state == "lost"
    assert not player.ended


def test_the_end_can_be_sought_and_the_beginning_again() -> None:
    records = session().records
    player = ReplayPlayer(records)
    player.seek_end()
    assert player.ended
    assert player.view() == live_views(records)[-1]
    player.rewind()
    assert (player.position_ns, player.ended) == (0, False)
    player.seek_end()
    assert player.view() == live_views(records)[-1]


# -- never transmits ---------------------------------------------------------------------


def test_it_refuses_to_send_and_says_so() -> None:
    player = ReplayPlayer(session().records)
    with pytest.raises(InputError, match="a replay never transmits"):
        player.order("birch rest")
    with pytest.raises(InputError, match="a replay never transmits"):
        player.clear(1, "key")
    assert player.log_trouble() == ""


def test_the_stop_key_only_leaves_a_note() -> None:
    records = session().records
    player = ReplayPlayer(records)
    player.seek_end()
    before = player.view()
    player.stop("key")
    after = player.view()
    assert after.stop == before.stop
    assert after.notices == (
        *before.notices,
        (records[-1][1].t_ns, "a replay never transmits: no all-stop was sent"),
    )
    player.rewind()
    assert player.view().notices == ()


def test_a_record_that_nothing_explains_is_noted_and_passed_over() -> None:
    script = Script().open()
    script.order(planned())
    script.heard(presence())
    player = ReplayPlayer(script.records)
    player.seek_end()
    assert len(player.view().modules) == 1
    assert any("record 3 cannot be shown: command 1" in text for _, text in player.view().notices)


# -- the same as live --------------------------------------------------------------------


@settings(max_examples=50, deadline=None)
@given(st.lists(st.integers(0, 8 * STEP_NS), max_size=12))
def test_wherever_it_stands_it_shows_what_was_shown_live(pauses: list[int]) -> None:
    records = session().records
    views = live_views(records)
    player = ReplayPlayer(records)
    player.play()
    now_ns = 5
    player.advance(now_ns)
    for pause in pauses:
        now_ns += pause
        player.advance(now_ns)
        at_ns = records[0][1].t_ns + player.position_ns
        folded = [view for (_, record), view in zip(records, views, strict=True)
                  if record.t_ns <= at_ns]  # fmt: skip
        if folded and player.position_ns:
            shown = player.view()
            assert shown.t_ns == at_ns
            assert shown.modules == folded[-1].modules
            assert shown.stop == folded[-1].stop
            assert shown.notices == folded[-1].notices


def write_log(path: Path, records: Sequence[tuple[int, Record]]) -> int:
    """Write a session to a log as the engine does, rows and all; return its number."""
    opened = records[0][1]
    assert isinstance(opened, SessionOpened)
    writer = LogWriter.open(path, opened)
    reducer = FleetReducer()
    for number, record in records:
        writer.append(number, record, reducer.apply(number, record).rows)
    writer.close("closed", "2026-03-04T10:00:00Z")
    return writer.session


def all_tables(path: Path, session_number: int) -> dict[str, list[tuple[object, ...]]]:
    """Every derived table as it is stored."""
    reader = LogReader.open(path)
    try:
        return {table.name: reader.table(table.name, session_number) for table in TABLES.values()}
    finally:
        reader.close()


def test_rebuild_gives_the_tables_that_the_live_session_left(tmp_path: Path) -> None:
    path = tmp_path / "log.db"
    records = session().records
    first = write_log(path, records)
    other = write_log(path, every_second(5))
    live, untouched = all_tables(path, first), all_tables(path, other)
    counts = rebuild_session(path, first)
    assert all_tables(path, first) == live
    assert all_tables(path, other) == untouched
    # Counted by hand from session(): a module, three telemetry messages, two orders of one pivot.
    expected = {"modules": 1, "telemetry": 3, "orders": 2, "commands": 2, "motions": 2}
    assert {name: counts[name] for name in expected} == expected
    assert counts["remarks"] == 1
    # A stop and its clear; a lock and a fault, each with its end; the bridge's restart; the boot.
    assert counts["alarms"] == 2 + 2 + 2 + 1 + 1
    assert (counts["settings"], counts["traces"], counts["bridge_status"]) == (5, 1, 2)
    rows = fold_rows(records)
    assert {name: len(kept) for name, kept in tables_of(rows).items()} == counts


def test_rebuild_mends_tables_that_were_damaged(tmp_path: Path) -> None:
    path = tmp_path / "log.db"
    number = write_log(path, session().records)
    live = all_tables(path, number)
    with sqlite3.connect(path) as connection:
        connection.execute("UPDATE motions SET outcome = 'short'")
        connection.execute("DELETE FROM telemetry")
    connection.close()
    assert all_tables(path, number) != live
    rebuild_session(path, number)
    assert all_tables(path, number) == live


def test_a_replay_from_the_log_shows_what_was_shown_live(tmp_path: Path) -> None:
    path = tmp_path / "log.db"
    records = session().records
    number = write_log(path, records)
    reader = LogReader.open(path)
    player = ReplayPlayer(reader.records(number))
    reader.close()
    player.seek_end()
    assert player.view() == live_views(records)[-1]


def test_rebuild_of_records_that_are_not_whole_leaves_the_tables(tmp_path: Path) -> None:
    path = tmp_path / "log.db"
    number = write_log(path, session().records)
    live = all_tables(path, number)
    with sqlite3.connect(path) as connection:
        connection.execute("DELETE FROM wire WHERE record = 3")  # the presence
    connection.close()
    with pytest.raises(LogError, match="the session's records are not whole"):
        rebuild_session(path, number)
    assert all_tables(path, number) == live


def test_rebuild_of_a_session_that_is_not_there_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "log.db"
    write_log(path, every_second(3))
    with pytest.raises(StorageMisuseError):
        rebuild_session(path, 99)
