"""Derived rows are exchanged whole or not at all, and rebuilt tables equal the live ones."""

import os
import sqlite3
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from storage.connect import connect_to_write
from storage.errors import LogUnavailableError, StorageMisuseError
from storage.inserts import Entry
from storage.log_file import LogFile
from storage.reader import DERIVED_TABLES as READER_TABLES
from storage.reader import LogReader
from storage.rebuild import DERIVED_TABLES, delete_derived, replace_derived, tidy
from storage.rows import Row
from storage.writer import LogWriter, WriterLimits
from tests.support.log_samples import (
    CLOSED_UTC,
    FAST_FOLDER,
    OPENED,
    any_row,
    ask,
    bytes_in,
    expired,
    module_row,
    motion_rows,
    telemetry,
)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "fleet.db"


def record(path: Path, entries: list[Entry]) -> int:
    log = LogFile.open(path, OPENED, connect_to_write)
    log.write(entries, durable=False, lost_records=0, lost_rows=0)
    log.end("closed", CLOSED_UTC, 0, 0)
    log.close()
    return log.session


def tables(path: Path, session: int) -> dict[str, list[tuple[object, ...]]]:
    reader = LogReader.open(path)
    found = {name: reader.table(name, session) for name in DERIVED_TABLES}
    reader.close()
    return found


SOME: list[Row] = [
    module_row(1, ""),
    module_row(1, "birch"),
    telemetry(2),
    telemetry(2, 1),
    *motion_rows(1, "landed"),
]


def test_the_list_of_derived_tables() -> None:
    assert DERIVED_TABLES == READER_TABLES
    assert len(DERIVED_TABLES) == 14
    assert not {"sessions", "wire", "records"} & set(DERIVED_TABLES)


def test_deleting_takes_derived_rows_only_and_of_one_session_only(path: Path) -> None:
    record(path, [(1, bytes_in(1), SOME)])
    record(path, [(1, bytes_in(1), SOME)])
    other = tables(path, 2)
    delete_derived(path, 1)
    assert tables(path, 1) == {name: [] for name in DERIVED_TABLES}
    assert tables(path, 2) == other
    assert ask(path, "SELECT session FROM wire ORDER BY session") == [(1,), (2,)]
    assert ask(path, "SELECT count(*) FROM sessions") == [(2,)]


def test_counts_by_table_are_those_of_the_rows_that_stay(path: Path) -> None:
    """Two rows of module 1 have one key: one stays."""
    record(path, [(1, bytes_in(1), [])])
    counts = replace_derived(path, 1, SOME)
    expected = dict.fromkeys(DERIVED_TABLES, 0)
    expected |= {"modules": 1, "telemetry": 2, "orders": 1, "commands": 1, "motions": 1}
    assert counts == expected
    assert ask(path, "SELECT name FROM modules") == [("birch",)]


@settings(max_examples=25, deadline=None)
@given(batches=st.lists(st.lists(any_row(), max_size=6), max_size=8))
def test_live_and_rebuilt_tables_are_identical(batches: list[list[Row]]) -> None:
    with tempfile.TemporaryDirectory(dir=FAST_FOLDER) as folder:
        path = Path(folder) / "fleet.db"
        writer = LogWriter.open(path, OPENED, limits=WriterLimits(batch_s=0.0))
        for number, rows in enumerate(batches, 1):
            writer.append(number, bytes_in(number), rows)
        writer.close("closed", CLOSED_UTC)
        live = tables(path, 1)
        delete_derived(path, 1)
        counts = replace_derived(path, 1, (row for rows in batches for row in rows))
        assert tables(path, 1) == live
        assert counts == {name: len(rows) for name, rows in live.items()}


def test_replacing_leaves_other_sessions_alone(path: Path) -> None:
    record(path, [(1, bytes_in(1), SOME)])
    record(path, [(1, bytes_in(1), SOME)])
    before = tables(path, 1)
    replace_derived(path, 2, [telemetry(5)])
    assert tables(path, 1) == before
    assert tables(path, 2)["telemetry"] == [telemetry(5)]
    assert tables(path, 2)["modules"] == []


def test_more_rows_than_are_gathered_at_once(path: Path) -> None:
    record(path, [(1, bytes_in(1), [])])
    counts = replace_derived(path, 1, (telemetry(each) for each in range(25_003)))
    assert counts["telemetry"] == 25_003
    assert ask(path, "SELECT count(*), max(record) FROM telemetry") == [(25_003, 25_002)]


def test_where_the_rows_fail_the_old_ones_stay(path: Path) -> None:
    record(path, [(1, bytes_in(1), SOME)])
    before = tables(path, 1)

    def broken() -> Iterator[Row]:
        yield telemetry(9)
        raise ValueError("a fault in the caller")

    with pytest.raises(ValueError, match="fault in the caller"):
        replace_derived(path, 1, broken())
    assert tables(path, 1) == before


def test_where_a_row_does_not_fit_the_old_ones_stay(path: Path) -> None:
    record(path, [(1, bytes_in(1), SOME)])
    before = tables(path, 1)
    bad = telemetry(9)._replace(flags=None)  # type: ignore[arg-type]
    with pytest.raises(LogUnavailableError, match=r"telemetry\.flags"):
        replace_derived(path, 1, [telemetry(8), bad])
    assert tables(path, 1) == before


def test_the_rows_may_be_read_from_the_same_log(path: Path) -> None:
    record(path, [(number, bytes_in(number), []) for number in range(1, 50)])
    reader = LogReader.open(path)
    rows = (telemetry(number) for number, _ in reader.records(1))
    assert replace_derived(path, 1, rows)["telemetry"] == 49
    reader.close()


def test_a_rebuilt_session_lacks_no_rows(path: Path) -> None:
    bad = telemetry(1)._replace(flags=None)  # type: ignore[arg-type]
    record(path, [(1, bytes_in(1), [bad])])
    connection = sqlite3.connect(path)
    connection.execute("UPDATE sessions SET lost_rows = 1, lost_records = 3")
    connection.commit()
    connection.close()
    replace_derived(path, 1, [telemetry(1)])
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(3, 0)]


def test_a_session_being_recorded_is_left_alone(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    for change in (lambda: delete_derived(path, 1), lambda: replace_derived(path, 1, SOME)):
        with pytest.raises(StorageMisuseError, match="still being recorded"):
            change()
    writer.close("closed", CLOSED_UTC)
    assert replace_derived(path, 1, SOME)["telemetry"] == 2


def test_a_session_cut_off_can_be_rebuilt(path: Path) -> None:
    program = (
        "import os, sys; from pathlib import Path; from storage.writer import LogWriter;"
        "from tests.support.log_samples import OPENED;"
        "LogWriter.open(Path(sys.argv[1]), OPENED); os._exit(1)"
    )
    env = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    subprocess.run([sys.executable, "-c", program, str(path)], check=False, env=env)
    assert ask(path, "SELECT ending FROM sessions") == [("",)]
    assert replace_derived(path, 1, SOME)["modules"] == 1


def test_another_session_is_recorded_while_one_is_rebuilt(path: Path) -> None:
    """Gathering the rows, the long part, does not lock the log."""
    record(path, [(1, bytes_in(1), [])])
    writer = LogWriter.open(path, OPENED)
    answers: list[str] = []

    def slow() -> Iterator[Row]:
        yield telemetry(1)
        answered = threading.Event()
        began_s = time.monotonic()
        writer.commit(1, expired(1), [], lambda why_not: (answers.append(why_not), answered.set()))
        assert answered.wait(5.0)
        answers.append("quick" if time.monotonic() - began_s < 1.5 else "slow")
        yield telemetry(2)

    assert replace_derived(path, 1, slow())["telemetry"] == 2
    assert answers == ["", "quick"]
    writer.close("closed", CLOSED_UTC)


@pytest.mark.parametrize("session", [0, 2, -1])
def test_a_session_that_is_not_there(path: Path, session: int) -> None:
    record(path, [])
    with pytest.raises(StorageMisuseError, match="no session"):
        delete_derived(path, session)
    with pytest.raises(StorageMisuseError, match="no session"):
        replace_derived(path, session, [])


def test_a_log_that_is_not_there_is_not_made(path: Path) -> None:
    with pytest.raises(LogUnavailableError, match="there is no log"):
        replace_derived(path, 1, [])
    with pytest.raises(LogUnavailableError, match="there is no log"):
        delete_derived(path, 1)
    assert not path.exists()


def test_a_locked_log_is_told(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("storage.connect.BUSY_S", 0.05)
    record(path, [(1, bytes_in(1), SOME)])
    other = sqlite3.connect(path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    with pytest.raises(LogUnavailableError, match="locked"):
        replace_derived(path, 1, [])
    other.execute("ROLLBACK")
    other.close()
    assert tables(path, 1)["modules"] == [module_row(1, "birch")]


def test_after_tidying_the_file_alone_is_the_log(path: Path, tmp_path: Path) -> None:
    session = record(path, [(1, bytes_in(1), ())])
    reader = LogReader.open(path)
    replace_derived(path, session, motion_rows(1, "landed"))
    reader.close()
    tidy(path)
    copy = tmp_path / "copy.db"
    copy.write_bytes(path.read_bytes())
    assert ask(copy, "SELECT count(*) FROM motions") == ask(path, "SELECT count(*) FROM motions")
    assert ask(copy, "SELECT count(*) FROM motions") != [(0,)]


def test_tidying_a_log_that_is_not_there_is_told(path: Path) -> None:
    with pytest.raises(LogUnavailableError):
        tidy(path)
    assert not path.exists()
