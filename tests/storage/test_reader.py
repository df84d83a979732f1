"""The reader gives back what was written, in order, and never stands in the writer's way."""

import sqlite3
import tempfile
import threading
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from storage.connect import connect_to_write
from storage.errors import LogUnavailableError, StorageMisuseError
from storage.inserts import Entry
from storage.log_file import LogFile
from storage.reader import BLOCK_RECORDS, DERIVED_TABLES, LogReader
from storage.records import Record
from storage.rows import TABLES, Row, SheetRow
from storage.writer import LogWriter, WriterLimits
from tests.support.log_samples import (
    CLOSED_UTC,
    FAST_FOLDER,
    OPENED,
    any_record,
    any_row,
    ask,
    bytes_in,
    correction,
    expired,
    identity,
    module_row,
    motion_rows,
    telemetry,
)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "fleet.db"


def record(path: Path, entries: list[Entry], ending: str = "closed") -> int:
    """Write one session and return its number."""
    log = LogFile.open(path, OPENED, connect_to_write)
    log.write(entries, durable=False, lost_records=0, lost_rows=0)
    if ending:
        log.end(ending, CLOSED_UTC, 0, 0)
    log.close()
    return log.session


def with_rows(path: Path, rows: list[Row]) -> int:
    return record(path, [(1, expired(1), rows)])


# -- what comes back -----------------------------------------------------------------------------


@settings(max_examples=40, deadline=None)
@given(st.lists(any_record(), max_size=30))
def test_every_record_comes_back_in_order(records: list[Record]) -> None:
    with tempfile.TemporaryDirectory(dir=FAST_FOLDER) as folder:
        path = Path(folder) / "fleet.db"
        expected = list(enumerate(records, 1))
        record(path, [(number, each, []) for number, each in expected])
        reader = LogReader.open(path)
        assert list(reader.records(1)) == expected
        reader.close()


@settings(max_examples=40, deadline=None)
@given(st.lists(any_row(), max_size=20))
def test_every_row_comes_back(rows: list[Row]) -> None:
    """The model: one dictionary a table, ordered by key."""
    with tempfile.TemporaryDirectory(dir=FAST_FOLDER) as folder:
        path = Path(folder) / "fleet.db"
        with_rows(path, rows)
        reader = LogReader.open(path)
        for row_type, table in TABLES.items():
            model = {
                tuple(getattr(row, name) for name in table.key): row
                for row in rows
                if type(row) is row_type
            }
            assert reader.table(table.name, 1) == [model[key] for key in sorted(model)]
        reader.close()


def test_records_of_both_sorts_merge_by_number(path: Path) -> None:
    entries: list[Entry] = [
        (number, expired(number) if number % 7 == 0 else bytes_in(number), [])
        for number in range(1, 200)
    ]
    record(path, entries)
    reader = LogReader.open(path)
    assert [(number, each) for number, each in reader.records(1)] == [
        (number, each) for number, each, _ in entries
    ]
    reader.close()


@pytest.mark.parametrize("extra", [-1, 0, 1])
def test_blocks_join_without_a_seam(path: Path, extra: int) -> None:
    total = BLOCK_RECORDS + extra
    record(path, [(number, bytes_in(number), []) for number in range(1, total + 1)])
    reader = LogReader.open(path)
    assert [number for number, _ in reader.records(1)] == list(range(1, total + 1))
    reader.close()


def test_a_gap_in_the_numbers_is_passed_over(path: Path) -> None:
    record(path, [(1, bytes_in(1), []), (90_000, bytes_in(2), []), (2_000_000, expired(3), [])])
    reader = LogReader.open(path)
    assert [number for number, _ in reader.records(1)] == [1, 90_000, 2_000_000]
    reader.close()


def test_sessions_are_read_apart(path: Path) -> None:
    record(path, [(1, bytes_in(1), [telemetry(1)])])
    record(path, [(1, bytes_in(2), [telemetry(2)])])
    reader = LogReader.open(path)
    assert list(reader.records(1)) == [(1, bytes_in(1))]
    assert list(reader.records(2)) == [(1, bytes_in(2))]
    assert reader.table("telemetry", 2) == [telemetry(2)]
    assert list(reader.records(3)) == []
    reader.close()


def test_a_damaged_record_is_told(path: Path) -> None:
    record(path, [(1, expired(1), []), (2, expired(2), [])])
    connection = sqlite3.connect(path)
    connection.execute("UPDATE records SET body = '{' WHERE record = 2")
    connection.commit()
    connection.close()
    reader = LogReader.open(path)
    stream = reader.records(1)
    assert next(stream) == (1, expired(1))
    with pytest.raises(LogUnavailableError, match="CommandExpired"):
        next(stream)
    reader.close()


# -- while it is written ---------------------------------------------------------------------------


def test_records_of_a_living_session_are_read(path: Path) -> None:
    writer = LogWriter.open(path, OPENED, limits=WriterLimits(batch_s=0.01))
    reader = LogReader.open(path)
    for first in (1, 101, 201):
        for number in range(first, first + 100):
            writer.append(number, bytes_in(number), [])
        written = threading.Event()
        writer.commit(first + 100, expired(first + 100), [], lambda _, w=written: w.set())
        assert written.wait(5.0)
        assert [number for number, _ in reader.records(1)][-1] == first + 100
    assert reader.sessions()[0].ending == ""
    writer.close("closed", CLOSED_UTC)
    assert reader.sessions()[0].ending == "closed"
    reader.close()


def test_records_written_during_the_reading_come_too(path: Path) -> None:
    log = LogFile.open(path, OPENED, connect_to_write)
    total = BLOCK_RECORDS
    log.write([(n, bytes_in(n), []) for n in range(1, total + 1)], False, 0, 0)
    reader = LogReader.open(path)
    stream = reader.records(1)
    first = [next(stream)[0] for _ in range(total)]
    log.write([(total + 1, expired(total + 1), [])], False, 0, 0)
    assert first == list(range(1, total + 1))
    assert [number for number, _ in stream] == [total + 1]
    reader.close()
    log.close()


def test_a_half_read_session_does_not_hold_the_wal(path: Path) -> None:
    """PRAGMA wal_checkpoint(TRUNCATE) answers busy = 1 while any reader needs the WAL."""
    log = LogFile.open(path, OPENED, connect_to_write)
    log.write([(n, bytes_in(n), []) for n in range(1, 3 * BLOCK_RECORDS)], False, 0, 0)
    reader = LogReader.open(path)
    stream = reader.records(1)
    for _ in range(BLOCK_RECORDS // 2):
        next(stream)
    log.write([(3 * BLOCK_RECORDS, bytes_in(1), [])], False, 0, 0)
    ((busy, _, _),) = ask(path, "PRAGMA wal_checkpoint(TRUNCATE)")
    assert busy == 0
    assert path.with_name("fleet.db-wal").stat().st_size == 0
    assert len(list(stream)) == 3 * BLOCK_RECORDS - BLOCK_RECORDS // 2
    reader.close()
    log.close()


# -- sessions --------------------------------------------------------------------------------------


def test_a_summary_of_each_session(path: Path) -> None:
    rows: list[Row] = [module_row(1, "birch", simulated=1), module_row(2, "elm", simulated=1)]
    rows += [*motion_rows(1, "landed"), *motion_rows(2, "short"), *motion_rows(3, "refused")]
    rows += [
        SheetRow(1, 5, None, "warm-up", 7, 24, None, "text"),
        SheetRow(2, 9, None, "floor 4350", 7, 24, None, "text"),
    ]
    with_rows(path, rows)
    record(path, [], ending="")
    third = record(path, [(1, bytes_in(1), [module_row(1, "birch")])])
    reader = LogReader.open(path)
    first, second, last = reader.sessions()
    uids = [uid for (uid,) in ask(path, "SELECT uid FROM sessions ORDER BY session")]
    assert first == (
        *(1, uids[0], "2026-03-02T08:00:00Z", CLOSED_UTC, "closed", "Mira"),
        *(True, 2, 3, 3, "floor 4350", 0),
    )
    assert (second.ending, second.closed_utc, second.modules, second.sheet) == (
        *("cut off", ""),
        *(0, ""),
    )
    assert (last.session, last.simulated, last.modules) == (third, False, 1)
    assert isinstance(first.simulated, bool)
    reader.close()


def test_an_empty_log_has_no_sessions(path: Path) -> None:
    from storage.schema import open_log

    open_log(path).close()
    reader = LogReader.open(path)
    assert reader.sessions() == []
    with pytest.raises(StorageMisuseError, match="no session yet"):
        reader.find_session("last")
    reader.close()


@pytest.fixture
def three(path: Path) -> LogReader:
    """Three sessions with uids that a test can name."""
    for _ in range(3):
        record(path, [])
    connection = sqlite3.connect(path)
    for session, start in enumerate(["abc1", "abc2", "2345"], 1):
        connection.execute(
            "UPDATE sessions SET uid = ? WHERE session = ?", (start + "f" * 28, session)
        )
    connection.commit()
    connection.close()
    return LogReader.open(path)


@pytest.mark.parametrize(
    ("text", "session"),
    [
        ("1", 1),
        (" 3 ", 3),
        ("last", 3),
        ("LAST", 3),
        ("abc1", 1),
        ("ABC2", 2),
        ("abc2" + "f" * 28, 2),
        ("2", 2),
        ("23", 3),
    ],
)
def test_a_session_is_found(three: LogReader, text: str, session: int) -> None:
    """'2' is a number before it is the beginning of a uid."""
    assert three.find_session(text) == session
    three.close()


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("4", "no session '4'.*newest is 3"),
        ("abc", "uid of 2 sessions"),
        ("", "no session ''"),
        ("%", "no session"),
        ("-1", "no session"),
        ("first", "no session 'first'"),
    ],
)
def test_a_session_that_is_not_there(three: LogReader, text: str, says: str) -> None:
    with pytest.raises(StorageMisuseError, match=says):
        three.find_session(text)
    three.close()


# -- trials ----------------------------------------------------------------------------------------


def test_trials_with_corrections(path: Path) -> None:
    """By hand: of six motions four count, one of them as a person saw it; the review may ask
    for the others, but a sheet's return motion is never a trial."""
    rows: list[Row] = [module_row(1, "birch")]
    rows += motion_rows(1, "landed", trial=1, source="sheet")
    rows += motion_rows(2, "landed", trial=0, source="sheet")
    rows += motion_rows(3, "short", trial=2, source="sheet", brake_ms=None)
    rows += motion_rows(4, "refused", trial=3, source="sheet")
    rows += motion_rows(5, "over")
    rows += motion_rows(6, "unseen")
    corrected = correction(106, "stuck")
    from storage.rows import CorrectionRow

    rows.append(CorrectionRow(9, 1, corrected.utc, identity(1), 77, 106, "stuck", "Mira", "saw it"))
    with_rows(path, rows)
    reader = LogReader.open(path)
    trials = reader.trials(1)
    assert trials[0] == (
        *("birch", "pivot", "floor", 4350, "landed", False, 1, 1, 41.5),
        "2026-03-02T08:00:10.000Z",
    )
    assert [(each.trial, each.outcome) for each in trials] == [
        (1, "landed"),
        (2, "short"),
        (0, "over"),
        (0, "stuck"),
    ]
    assert trials[1].brake_ms is None
    assert [each.outcome for each in reader.trials(1, all_outcomes=True)] == [
        *("landed", "short", "refused", "over", "stuck")
    ]
    reader.close()


def test_trials_of_one_session_or_all(path: Path) -> None:
    with_rows(path, [module_row(1, "birch"), *motion_rows(1, "landed")])
    with_rows(path, [module_row(1, "birch", simulated=1), *motion_rows(1, "short", simulated=1)])
    reader = LogReader.open(path)
    assert [(each.session, each.simulated) for each in reader.trials(None)] == [
        (1, False),
        (2, True),
    ]
    assert [each.outcome for each in reader.trials(2)] == ["short"]
    assert reader.trials(7) == []
    reader.close()


def test_trials_come_in_the_order_of_their_commands(path: Path) -> None:
    rows: list[Row] = [module_row(1, "birch")]
    for command in (30, 4, 200, 11):
        rows += motion_rows(command, "landed", trial=command)
    with_rows(path, rows)
    reader = LogReader.open(path)
    assert [each.trial for each in reader.trials(None)] == [4, 11, 30, 200]
    reader.close()


# -- what cannot be read ---------------------------------------------------------------------------


def test_a_missing_log(path: Path) -> None:
    with pytest.raises(LogUnavailableError, match="there is no log at"):
        LogReader.open(path)
    assert not path.exists()


def test_an_empty_file_is_no_log(path: Path) -> None:
    path.touch()
    with pytest.raises(LogUnavailableError, match="empty or from an older version"):
        LogReader.open(path)


def test_other_files_are_refused(path: Path) -> None:
    connection = sqlite3.connect(path)
    connection.execute("CREATE TABLE letters (letter)")
    connection.commit()
    connection.close()
    with pytest.raises(LogUnavailableError, match="another program"):
        LogReader.open(path)


def test_a_newer_log_is_refused(path: Path) -> None:
    record(path, [])
    connection = sqlite3.connect(path)
    connection.execute("UPDATE _sqlite_migrations SET name = '9999_later' WHERE name LIKE '0001%'")
    connection.commit()
    connection.close()
    with pytest.raises(LogUnavailableError, match="newer version"):
        LogReader.open(path)


@pytest.mark.parametrize("name", ["sessions", "wire", "records", "sqlite_master", "x; --"])
def test_only_derived_tables_are_given_whole(path: Path, name: str) -> None:
    record(path, [])
    reader = LogReader.open(path)
    with pytest.raises(StorageMisuseError, match="no derived table"):
        reader.table(name, 1)
    reader.close()


def test_every_derived_table_can_be_asked_for(path: Path) -> None:
    record(path, [])
    reader = LogReader.open(path)
    assert {name: reader.table(name, 1) for name in DERIVED_TABLES} == {
        table.name: [] for table in TABLES.values()
    }
    reader.close()


def test_a_closed_reader_says_so(path: Path) -> None:
    record(path, [])
    reader = LogReader.open(path)
    reader.close()
    reader.close()
    with pytest.raises(StorageMisuseError, match="closed"):
        reader.sessions()


def test_reading_leaves_the_log_as_it_was(path: Path) -> None:
    record(path, [(1, bytes_in(1), [telemetry(1)])])
    before = path.read_bytes()
    reader = LogReader.open(path)
    answers: list[Any] = [reader.sessions(), list(reader.records(1)), reader.trials(None)]
    reader.close()
    assert len(answers[1]) == 1
    assert path.read_bytes() == before
