"""One session on the disk: entered, written whole or not at all, ended, or found cut off."""

import os
import signal
import sqlite3
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from storage.connect import connect_to_write
from storage.errors import LogUnavailableError
from storage.inserts import Entry
from storage.log_file import CHECKPOINT_ROWS, LogFile
from storage.owner import owner_file
from storage.records import SessionOpened
from tests.support.log_samples import CLOSED_UTC, OPENED, ask, bytes_in, expired, telemetry


def open_file(path: Path, connect: Any = connect_to_write) -> LogFile:
    return LogFile.open(path, OPENED, connect)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "fleet.db"


def write(log: LogFile, entries: list[Entry], durable: bool = False) -> Any:
    return log.write(entries, durable, 0, 0)


class FailingConnection(sqlite3.Connection):
    """A connection that reports a failure of the disk while ``code`` is set."""

    code = 0

    def executemany(self, *args: Any) -> sqlite3.Cursor:
        if FailingConnection.code:
            error = sqlite3.OperationalError("disk I/O error")
            error.sqlite_errorcode = FailingConnection.code
            raise error
        return super().executemany(*args)


class Failing:
    """A way to connect whose connections can be made to fail, and counts them."""

    def __init__(self) -> None:
        self.modes: list[str] = []
        FailingConnection.code = 0

    def __call__(self, path: Path, mode: str) -> sqlite3.Connection:
        self.modes.append(mode)
        return sqlite3.connect(
            f"{path.as_uri()}?mode={mode}",
            uri=True,
            isolation_level=None,
            check_same_thread=False,
            factory=FailingConnection,
        )


def test_the_sessions_row(path: Path) -> None:
    log = open_file(path)
    (row,) = ask(
        path,
        "SELECT session, opened_utc, opened_t_ns, closed_utc, ending, operator, epoch, pace,"
        " program, lost_records, lost_rows, length(uid) FROM sessions",
    )
    assert row == (
        *(1, "2026-03-02T08:00:00Z", 5_000_000_000, None, "", "Mira", 1_772_438_400),
        *(1.0, "tumblewire 0.1.0", 0, 0, 32),
    )
    log.end("closed", CLOSED_UTC, 0, 0)
    log.close()
    assert ask(path, "SELECT closed_utc, ending FROM sessions") == [(CLOSED_UTC, "closed")]


def test_sessions_count_up_and_uids_differ(path: Path) -> None:
    logs = [open_file(path) for _ in range(3)]
    assert [log.session for log in logs] == [1, 2, 3]
    for log in logs:
        log.close()
    assert ask(path, "SELECT count(DISTINCT uid) FROM sessions") == [(3,)]


def test_an_operators_name_in_another_encoding(path: Path) -> None:
    name = b"Zo\xeb".decode(errors="surrogateescape")
    opened = SessionOpened(1, "2026-03-02T08:00:00Z", name, 1, 1.0, "x")
    LogFile.open(path, opened, connect_to_write).close()
    assert ask(path, "SELECT operator FROM sessions") == [("Zo?",)]


def test_writing_is_seen_by_others_at_once(path: Path) -> None:
    log = open_file(path)
    write(log, [(1, bytes_in(1), [telemetry(1)])])
    assert ask(path, "SELECT session, record, data FROM wire") == [(1, 1, bytes_in(1).data)]
    log.close()


@pytest.mark.parametrize(("durable", "level"), [(True, 2), (False, 1)])
def test_synchronous_as_asked(path: Path, durable: bool, level: int) -> None:
    """PRAGMA synchronous: 1 is NORMAL, 2 is FULL (SQLite's manual)."""
    log = open_file(path)
    write(log, [(1, bytes_in(1), [])], not durable)
    write(log, [(2, bytes_in(2), [])], durable)
    assert log._connection.execute("PRAGMA synchronous").fetchone() == (level,)
    log.close()


def test_a_killed_session_is_cut_off_and_a_living_one_is_not(path: Path) -> None:
    program = (
        "import sys, time; from pathlib import Path; from storage.connect import connect_to_write;"
        "from storage.log_file import LogFile; from tests.support.log_samples import OPENED;"
        "log = LogFile.open(Path(sys.argv[1]), OPENED, connect_to_write);"
        "print(log.session, flush=True); time.sleep(60)"
    )
    other = subprocess.Popen(
        [sys.executable, "-c", program, str(path)],
        stdout=subprocess.PIPE,
        text=True,
        env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
    )
    assert other.stdout is not None
    assert other.stdout.readline() == "1\n"
    second = open_file(path)
    assert ask(path, "SELECT ending FROM sessions ORDER BY session") == [("",), ("",)]
    os.kill(other.pid, signal.SIGKILL)
    other.wait()
    other.stdout.close()
    third = open_file(path)
    endings = ask(path, "SELECT ending, closed_utc FROM sessions ORDER BY session")
    assert endings == [("cut off", None), ("", None), ("", None)]
    second.close()
    third.close()
    left = [each.name for each in path.parent.iterdir() if "-owner-" in each.name]
    assert left == []


def test_a_copied_log_has_no_owner(path: Path, tmp_path: Path) -> None:
    log = open_file(path)
    copy = tmp_path / "copy.db"
    with sqlite3.connect(path) as source, sqlite3.connect(copy) as target:
        source.backup(target)
    source.close()
    target.close()
    open_file(copy).close()
    assert ask(copy, "SELECT ending FROM sessions WHERE session = 1") == [("cut off",)]
    assert ask(path, "SELECT ending FROM sessions") == [("",)]
    log.close()


def test_a_failed_write_leaves_nothing(path: Path) -> None:
    log = open_file(path, Failing())
    FailingConnection.code = sqlite3.SQLITE_FULL
    with pytest.raises(LogUnavailableError, match="full"):
        write(log, [(1, bytes_in(1), [telemetry(1)])])
    FailingConnection.code = 0
    assert ask(path, "SELECT count(*) FROM wire") == [(0,)]
    write(log, [(1, bytes_in(1), [telemetry(1)])])
    assert ask(path, "SELECT count(*) FROM wire") == [(1,)]
    log.close()


@pytest.mark.parametrize(
    ("code", "renewed"),
    [
        (sqlite3.SQLITE_IOERR, True),
        (sqlite3.SQLITE_CORRUPT, True),
        (sqlite3.SQLITE_FULL, False),
        (sqlite3.SQLITE_BUSY, False),
    ],
)
def test_a_connection_that_failed_is_opened_anew(path: Path, code: int, renewed: bool) -> None:
    connect = Failing()
    log = open_file(path, connect)
    FailingConnection.code = code
    with pytest.raises(LogUnavailableError):
        write(log, [(1, bytes_in(1), [])])
    FailingConnection.code = 0
    write(log, [(1, bytes_in(1), [])], durable=True)
    assert connect.modes == (["rwc", "rw"] if renewed else ["rwc"])
    assert log._connection.execute("PRAGMA synchronous").fetchone() == (2,)
    log.close()


def test_a_log_that_was_deleted_is_noticed(path: Path) -> None:
    """POSIX would go on writing into the deleted file."""
    log = open_file(path)
    aside = path.with_suffix(".aside")
    path.rename(aside)
    with pytest.raises(LogUnavailableError, match="gone; put it back"):
        write(log, [(1, bytes_in(1), [])])
    path.touch()
    with pytest.raises(LogUnavailableError, match="moved or replaced"):
        write(log, [(1, bytes_in(1), [])])
    path.unlink()
    aside.rename(path)
    write(log, [(1, bytes_in(1), [])])
    log.close()
    assert ask(path, "SELECT count(*) FROM wire") == [(1,)]


def test_rows_that_do_not_fit_are_left_out_and_counted(path: Path) -> None:
    log = open_file(path)
    bad = telemetry(2)._replace(wheel_rpm=None)  # type: ignore[arg-type]
    refused = write(
        log,
        [
            (1, bytes_in(1), [telemetry(1)]),
            (2, bytes_in(2), [telemetry(2, 1), bad]),
            (3, bytes_in(3), [telemetry(3)]),
        ],
    )
    assert list(refused.rows) == [1]
    assert refused.records == {}
    assert "record 2" in refused.rows[1]
    assert ask(path, "SELECT record FROM wire") == [(1,), (2,), (3,)]
    assert ask(path, "SELECT record FROM telemetry") == [(1,), (3,)]
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(0, 2)]
    log.close()


def test_a_record_that_does_not_fit_is_left_out_and_counted(path: Path) -> None:
    log = open_file(path)
    bad = expired(2)
    object.__setattr__(bad, "t_ns", 2**70)
    refused = write(log, [(1, expired(1), []), (2, bad, [telemetry(2)]), (3, expired(3), [])])
    assert list(refused.records) == [1]
    assert ask(path, "SELECT record FROM records") == [(1,), (3,)]
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(1, 1)]
    log.close()


def test_losses_told_from_outside_are_written(path: Path) -> None:
    log = open_file(path)
    log.write([(1, expired(1), [])], durable=False, lost_records=12, lost_rows=34)
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(12, 34)]
    log.end("closed", CLOSED_UTC, 13, 35)
    log.close()
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(13, 35)]


def test_the_wal_is_copied_into_the_file_between_batches(path: Path) -> None:
    log = open_file(path)
    write(log, [(1, bytes_in(1), [telemetry(1)])])
    log.checkpoint()
    small = path.stat().st_size
    rows = [telemetry(2, part) for part in range(CHECKPOINT_ROWS)]
    write(log, [(2, bytes_in(2), rows)])
    assert path.stat().st_size == small
    log.checkpoint()
    assert path.stat().st_size > small + CHECKPOINT_ROWS * 30
    log.close()


def test_the_last_one_out_leaves_the_log_alone(path: Path) -> None:
    log = open_file(path)
    write(log, [(1, bytes_in(1), [])])
    log.close()
    assert [each.name for each in path.parent.iterdir()] == ["fleet.db"]


def test_two_sessions_write_the_same_log_in_turn(path: Path) -> None:
    first, second = open_file(path), open_file(path)
    for number in range(1, 20):
        write(first, [(number, bytes_in(number), [])], number % 2 == 0)
        write(second, [(number, bytes_in(number), [])], number % 3 == 0)
    first.close()
    second.close()
    assert ask(path, "SELECT session, count(*) FROM wire GROUP BY session") == [(1, 19), (2, 19)]


def test_a_log_locked_by_another_program(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("storage.connect.BUSY_S", 0.05)
    log = open_file(path)
    other = sqlite3.connect(path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    with pytest.raises(LogUnavailableError, match="locked by another program"):
        write(log, [(1, bytes_in(1), [])])
    other.execute("ROLLBACK")
    write(log, [(1, bytes_in(1), [])])
    other.close()
    log.close()


def test_a_session_that_cannot_be_entered_leaves_no_owner(path: Path) -> None:
    open_file(path).close()
    connection = sqlite3.connect(path)
    connection.execute("DROP TABLE sessions")
    connection.commit()
    connection.close()
    with pytest.raises(LogUnavailableError, match="no such table"):
        open_file(path)
    assert [each.name for each in path.parent.iterdir()] == ["fleet.db"]


def test_a_symbolic_link_leads_to_the_same_owner(path: Path, tmp_path: Path) -> None:
    log = open_file(path)
    link = tmp_path / "elsewhere" / "link.db"
    link.parent.mkdir()
    link.symlink_to(path)
    second = open_file(link)
    assert ask(path, "SELECT ending FROM sessions WHERE session = 1") == [("",)]
    (uid,) = ask(path, "SELECT uid FROM sessions WHERE session = 2")[0]
    assert owner_file(path, uid).exists()
    log.close()
    second.close()
