"""The writer keeps its promises: order, durability of a commit, nothing dropped in silence."""

import os
import re
import signal
import sqlite3
import subprocess
import sys
import threading
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from storage.errors import LogUnavailableError, StorageMisuseError
from storage.reader import LogReader
from storage.records import Record
from storage.writer import BATCH_ENTRIES, LogWriter, WriterLimits
from tests.support.log_samples import (
    CLOSED_UTC,
    OPENED,
    ask,
    bytes_in,
    expired,
    module_row,
    telemetry,
)

QUICK = WriterLimits(batch_s=0.01, retry_s=0.05)
ENV = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "logs" / "fleet.db"


def until(check: Callable[[], Any], wait_s: float = 10.0) -> Any:
    """Wait for something to become true, and return it."""
    end_s = time.monotonic() + wait_s
    while not (found := check()):
        assert time.monotonic() < end_s, "waited in vain"
        time.sleep(0.005)
    return found


def stored(path: Path, session: int = 1) -> list[tuple[int, Record]]:
    reader = LogReader.open(path)
    found = list(reader.records(session))
    reader.close()
    return found


class Answers:
    """Collects what commits were told."""

    def __init__(self) -> None:
        self.told: list[tuple[int, str]] = []
        self.threads: set[str] = set()

    def __call__(self, number: int) -> Callable[[str], None]:
        def done(why_not: str) -> None:
            self.told.append((number, why_not))
            self.threads.add(threading.current_thread().name)

        return done


class SmallDisk:
    """A way to connect to a log that may grow to so many pages only."""

    def __init__(self) -> None:
        self.connections: list[sqlite3.Connection] = []

    def __call__(self, path: Path, mode: str) -> sqlite3.Connection:
        connection = sqlite3.connect(
            f"{path.as_uri()}?mode={mode}",
            uri=True,
            timeout=0.05,
            isolation_level=None,
            check_same_thread=False,
        )
        self.connections.append(connection)
        return connection

    def fill(self) -> None:
        """Allow no more pages than there are (SQLite raises the figure to that)."""
        self.connections[-1].execute("PRAGMA max_page_count = 1")

    def free(self) -> None:
        self.connections[-1].execute("PRAGMA max_page_count = 1000000")


# -- in order ----------------------------------------------------------------------------------


def test_what_is_appended_is_there_after_closing_in_order(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    expected: list[tuple[int, Record]] = []
    for number in range(1, 300):
        record: Record = bytes_in(number) if number % 3 else expired(number)
        expected.append((number, record))
        writer.append(number, record, [telemetry(number)] if number % 3 else [])
    writer.close("closed", CLOSED_UTC)
    assert stored(path) == expected
    assert ask(path, "SELECT count(*) FROM telemetry") == [(200,)]  # 299 less 99 by three
    assert ask(path, "SELECT ending, closed_utc FROM sessions") == [("closed", CLOSED_UTC)]


def test_an_append_is_written_soon_without_being_asked(path: Path) -> None:
    """The contract says 200 ms; three seconds leave room for a busy machine."""
    writer = LogWriter.open(path, OPENED)
    writer.append(1, bytes_in(1), [])
    until(lambda: ask(path, "SELECT count(*) FROM wire") == [(1,)], 3.0)
    writer.close("closed", CLOSED_UTC)


def test_more_than_one_batch(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    total = BATCH_ENTRIES * 2 + 7
    for number in range(1, total + 1):
        writer.append(number, bytes_in(number), [module_row(1, f"at {number}")])
    writer.close("closed", CLOSED_UTC)
    assert ask(path, "SELECT count(*), max(record) FROM wire") == [(total, total)]
    assert ask(path, "SELECT name FROM modules") == [(f"at {total}",)]


def test_a_later_row_takes_the_place_of_the_earlier_over_batches(path: Path) -> None:
    writer = LogWriter.open(path, OPENED, limits=QUICK)
    for number, name in enumerate(["", "birch", "birch 2"], 1):
        writer.append(number, bytes_in(number), [module_row(1, name)])
        until(lambda name=name: ask(path, "SELECT name FROM modules") == [(name,)])
    writer.close("closed", CLOSED_UTC)
    assert ask(path, "SELECT count(*) FROM modules") == [(1,)]


def test_the_session_number(path: Path) -> None:
    first = LogWriter.open(path, OPENED)
    second = LogWriter.open(path, OPENED)
    assert (first.session, second.session) == (1, 2)
    first.close("closed", CLOSED_UTC)
    second.close("closed", CLOSED_UTC)


# -- commits -----------------------------------------------------------------------------------


def test_commits_are_answered_in_order_after_what_came_before(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    answers = Answers()
    seen: list[int] = []

    def look(why_not: str) -> None:
        seen.append(ask(path, "SELECT count(*) FROM wire")[0][0])

    for number in range(1, 31):
        if number % 10 == 0:
            writer.commit(number, expired(number), [], look)
            writer.commit(number + 100, expired(number + 100), [], answers(number))
        else:
            writer.append(number, bytes_in(number), [])
    writer.close("closed", CLOSED_UTC)
    assert answers.told == [(10, ""), (20, ""), (30, "")]
    assert answers.threads == {"log writer"}
    assert [count >= least for count, least in zip(seen, (9, 18, 27), strict=True)] == [True] * 3


def test_a_commit_does_not_wait_for_the_batch(path: Path) -> None:
    writer = LogWriter.open(path, OPENED, limits=WriterLimits(batch_s=30.0))
    answered = threading.Event()
    writer.append(1, bytes_in(1), [])
    writer.commit(2, expired(2), [], lambda why_not: answered.set())
    assert answered.wait(5.0)
    assert ask(path, "SELECT count(*) FROM wire") == [(1,)]
    writer.close("closed", CLOSED_UTC)


KILLED = """
import os, sys, threading
from pathlib import Path
from storage.writer import LogWriter
from tests.support.log_samples import OPENED, expired, bytes_in, telemetry
writer = LogWriter.open(Path(sys.argv[1]), OPENED)
number = 0
while True:
    number += 1
    writer.append(number, bytes_in(number), [telemetry(number)])
    number += 1
    durable = threading.Event()
    writer.commit(number, expired(number), [], lambda why_not: why_not or durable.set())
    durable.wait()
    os.write(1, b"%d\\n" % number)
"""


def test_what_was_committed_survives_a_kill(path: Path) -> None:
    """Killed without warning, after some commits were answered: each of those is there, with
    all that was appended before it. Nothing is promised of what was not answered."""
    writing = subprocess.Popen(
        [sys.executable, "-c", KILLED, str(path)], stdout=subprocess.PIPE, env=ENV
    )
    assert writing.stdout is not None
    for _ in range(40):
        assert writing.stdout.readline()
    os.kill(writing.pid, signal.SIGKILL)
    rest = writing.stdout.read().split()
    writing.stdout.close()
    writing.wait()
    last = int(rest[-1]) if rest else 80
    assert last >= 80
    found = stored(path)
    assert [number for number, _ in found][:last] == list(range(1, last + 1))
    assert found[last - 1] == (last, expired(last))
    assert ask(path, "SELECT count(*) >= ? FROM telemetry", last // 2) == [(1,)]
    LogWriter.open(path, OPENED).close("closed", CLOSED_UTC)
    assert ask(path, "SELECT ending FROM sessions") == [("cut off",), ("closed",)]


def test_a_callback_that_fails_does_not_end_the_log(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    reported: list[Any] = []
    monkeypatch.setattr(threading, "excepthook", reported.append)
    writer = LogWriter.open(path, OPENED)
    answers = Answers()

    def fail(why_not: str) -> None:
        raise RuntimeError("the caller's fault")

    writer.commit(1, expired(1), [], fail)
    writer.commit(2, expired(2), [], answers(2))
    writer.close("closed", CLOSED_UTC)
    assert answers.told == [(2, "")]
    assert [str(each.exc_value) for each in reported] == ["the caller's fault"]


def test_an_answer_may_append_more(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    again = threading.Event()

    def append(why_not: str) -> None:
        writer.append(2, expired(2), [])
        writer.commit(3, expired(3), [], lambda why_not: again.set())

    writer.commit(1, expired(1), [], append)
    assert again.wait(5.0)
    writer.close("closed", CLOSED_UTC)
    assert [number for number, _ in stored(path)] == [1, 2, 3]


# -- closing -----------------------------------------------------------------------------------


def test_closing_twice_is_safe_and_later_records_are_misuse(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    writer.close("closed", CLOSED_UTC)
    writer.close("other", "later")
    with pytest.raises(StorageMisuseError, match="closed"):
        writer.append(1, expired(1), [])
    with pytest.raises(StorageMisuseError, match="closed"):
        writer.commit(1, expired(1), [], lambda why_not: None)
    assert ask(path, "SELECT ending, closed_utc FROM sessions") == [("closed", CLOSED_UTC)]
    assert writer.trouble() == ""


def test_closing_leaves_one_file_and_no_thread(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    writer.append(1, expired(1), [])
    writer.close("closed", CLOSED_UTC)
    assert [each.name for each in path.parent.iterdir()] == ["fleet.db"]
    assert not [each for each in threading.enumerate() if each.name == "log writer"]


# -- when the disk fails -------------------------------------------------------------------------


def test_a_full_disk_loses_nothing(path: Path) -> None:
    disk = SmallDisk()
    writer = LogWriter.open(path, OPENED, limits=QUICK, connect=disk)
    assert writer.trouble() == ""
    disk.fill()
    answers = Answers()
    for number in range(1, 2_001):
        writer.append(number, bytes_in(number), [telemetry(number)])
    trouble = until(writer.trouble)
    assert "full" in trouble
    waiting = re.search(r"; (\d+) records wait in memory", trouble)
    assert waiting is not None
    assert 0 < int(waiting[1]) <= 2_000
    writer.commit(2_001, expired(2_001), [], answers(2_001))
    until(lambda: answers.told)
    assert answers.told[0][0] == 2_001
    assert "full" in answers.told[0][1]
    disk.free()
    until(lambda: not writer.trouble())
    writer.commit(2_002, expired(2_002), [], answers(2_002))
    writer.close("closed", CLOSED_UTC)
    assert answers.told[1:] == [(2_002, "")]
    assert [number for number, _ in stored(path)] == list(range(1, 2_003))
    assert ask(path, "SELECT count(*) FROM telemetry") == [(2_000,)]
    assert ask(path, "SELECT lost_records, lost_rows, ending FROM sessions") == [(0, 0, "closed")]


def test_a_disk_that_is_full_from_the_start(path: Path) -> None:
    def full(path: Path, mode: str) -> sqlite3.Connection:
        connection = sqlite3.connect(path, isolation_level=None, check_same_thread=False)
        connection.execute("PRAGMA max_page_count = 5")
        return connection

    with pytest.raises(LogUnavailableError, match="full; free some space"):
        LogWriter.open(path, OPENED, connect=full)
    LogWriter.open(path, OPENED).close("closed", CLOSED_UTC)
    assert ask(path, "SELECT session, ending FROM sessions") == [(1, "closed")]


def test_a_commit_is_refused_at_once_between_two_attempts(path: Path) -> None:
    disk = SmallDisk()
    limits = WriterLimits(batch_s=0.01, retry_s=60.0)
    writer = LogWriter.open(path, OPENED, limits=limits, connect=disk)
    disk.fill()
    for number in range(1, 500):
        writer.append(number, bytes_in(number), [])
    until(writer.trouble)
    answers = Answers()
    began_s = time.monotonic()
    writer.commit(500, expired(500), [], answers(500))
    until(lambda: answers.told)
    assert time.monotonic() - began_s < 5.0
    assert "full" in answers.told[0][1]
    disk.free()
    writer.close("closed", CLOSED_UTC)
    assert len(stored(path)) == 500


def test_beyond_the_backlog_losses_are_counted_and_written(path: Path) -> None:
    """20 may wait: nine records with one row each are 18, the tenth would make 20 with its row;
    the eleventh is the first that is lost."""
    disk = SmallDisk()
    limits = WriterLimits(batch_s=0.01, retry_s=0.05, backlog_rows=20)
    writer = LogWriter.open(path, OPENED, limits=limits, connect=disk)
    other = sqlite3.connect(path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    answers = Answers()
    for number in range(1, 26):
        writer.append(number, bytes_in(number), [telemetry(number)])
    writer.commit(26, expired(26), [], answers(26))
    until(lambda: "locked" in writer.trouble())
    assert "10 records wait in memory, which is full: 16 records lost" in writer.trouble()
    until(lambda: answers.told)
    assert "memory" in answers.told[0][1]
    other.execute("ROLLBACK")
    other.close()
    until(lambda: not writer.trouble())
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(16, 15)]
    writer.append(27, bytes_in(27), [])
    writer.close("closed", CLOSED_UTC)
    assert [number for number, _ in stored(path)] == [*range(1, 11), 27]
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(16, 15)]


def test_appending_never_waits_for_a_locked_log(path: Path) -> None:
    writer = LogWriter.open(path, OPENED, limits=QUICK)
    other = sqlite3.connect(path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    writer.append(1, bytes_in(1), [])
    time.sleep(0.05)
    slowest_s = 0.0
    for number in range(2, 300):
        began_s = time.monotonic()
        writer.append(number, bytes_in(number), [])
        slowest_s = max(slowest_s, time.monotonic() - began_s)
    assert slowest_s < 1.0  # the busy time is 2 s
    other.execute("ROLLBACK")
    other.close()
    writer.close("closed", CLOSED_UTC)
    assert len(stored(path)) == 299


def test_closing_on_a_full_disk_says_what_was_not_written(path: Path) -> None:
    disk = SmallDisk()
    writer = LogWriter.open(path, OPENED, limits=QUICK, connect=disk)
    disk.fill()
    for number in range(1, 1_001):
        writer.append(number, bytes_in(number), [])
    answers = Answers()
    writer.commit(1_001, expired(1_001), [], answers(1_001))
    with pytest.raises(LogUnavailableError, match=r"full.*1001 records not written"):
        writer.close("closed", CLOSED_UTC)
    assert len(answers.told) == 1
    assert answers.told[0][1]
    assert ask(path, "SELECT ending FROM sessions") == [("",)]
    LogWriter.open(path, OPENED).close("closed", CLOSED_UTC)
    assert ask(path, "SELECT ending FROM sessions") == [("cut off",), ("closed",)]


def test_a_log_that_was_moved_away_and_put_back(path: Path) -> None:
    writer = LogWriter.open(path, OPENED, limits=QUICK)
    aside = path.with_suffix(".aside")
    path.rename(aside)
    writer.append(1, bytes_in(1), [])
    assert "put it back" in until(writer.trouble)
    aside.rename(path)
    until(lambda: not writer.trouble())
    writer.close("closed", CLOSED_UTC)
    assert [number for number, _ in stored(path)] == [1]


def test_what_does_not_fit_is_refused_and_the_rest_written(path: Path) -> None:
    writer = LogWriter.open(path, OPENED)
    answers = Answers()
    bad = telemetry(2)._replace(flags=None)  # type: ignore[arg-type]
    writer.append(1, bytes_in(1), [telemetry(1)])
    writer.commit(2, expired(2), [bad], answers(2))
    writer.commit(3, expired(3), [telemetry(3)], answers(3))
    writer.close("closed", CLOSED_UTC)
    assert [number for number, _ in answers.told] == [2, 3]
    assert "does not fit" in answers.told[0][1]
    assert answers.told[1][1] == ""
    assert [number for number, _ in stored(path)] == [1, 2, 3]
    assert ask(path, "SELECT record FROM telemetry") == [(1,), (3,)]
    assert ask(path, "SELECT lost_records, lost_rows FROM sessions") == [(0, 1)]


def test_a_fault_in_the_writer_itself_is_no_silence(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(threading, "excepthook", lambda args: None)
    writer = LogWriter.open(path, OPENED)

    def fail(*args: Any) -> None:
        raise MemoryError("none left")

    monkeypatch.setattr(writer._log, "write", fail)
    answers = Answers()
    writer.commit(1, expired(1), [], answers(1))
    assert "writer failed" in until(writer.trouble)
    until(lambda: answers.told)
    assert "writer failed" in answers.told[0][1]
    writer.append(2, expired(2), [])
    writer.commit(3, expired(3), [], answers(3))
    assert answers.told[1][0] == 3
    assert "writer failed" in answers.told[1][1]
    with pytest.raises(LogUnavailableError, match="writer failed"):
        writer.close("closed", CLOSED_UTC)


LIMITED = """
import resource, sys, time
from pathlib import Path
from storage.writer import LogWriter, WriterLimits
from tests.support.log_samples import CLOSED_UTC, OPENED, bytes_in, telemetry
path = Path(sys.argv[1])
writer = LogWriter.open(path, OPENED, limits=WriterLimits(batch_s=0.01, retry_s=0.05))
_, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
resource.setrlimit(resource.RLIMIT_FSIZE, (400_000, hard))
number, end_s = 0, time.monotonic() + 20
while not writer.trouble():
    assert time.monotonic() < end_s
    number += 1
    writer.append(number, bytes_in(number), [telemetry(number)])
    time.sleep(0.0001)
print(writer.trouble())
for _ in range(100):
    number += 1
    writer.append(number, bytes_in(number), [telemetry(number)])
resource.setrlimit(resource.RLIMIT_FSIZE, (hard, hard))
while writer.trouble():
    assert time.monotonic() < end_s
    time.sleep(0.01)
writer.close("closed", CLOSED_UTC)
print(number)
"""


def test_a_limit_of_the_operating_system(path: Path) -> None:
    """No injected failure here: the system itself refuses to let the file grow."""
    pytest.importorskip("resource", reason="needs POSIX file size limits")
    done = subprocess.run(
        [sys.executable, "-c", LIMITED, str(path)],
        capture_output=True,
        text=True,
        check=False,
        env=ENV,
    )
    assert done.returncode == 0, done.stderr
    trouble, last = done.stdout.splitlines()
    assert "fleet.db" in trouble
    assert [number for number, _ in stored(path)] == list(range(1, int(last) + 1))
    assert ask(path, "SELECT lost_records FROM sessions") == [(0,)]


# -- with others ---------------------------------------------------------------------------------

WATCH = """
import sqlite3, sys, time
connection = sqlite3.connect(f"file:{sys.argv[1]}?mode=ro", uri=True)
print("watching", flush=True)
last, looks, end_s = 0, 0, time.monotonic() + 20
while last < int(sys.argv[2]) and time.monotonic() < end_s:
    (count,) = connection.execute("SELECT count(*) FROM wire").fetchone()
    (rows,) = connection.execute("SELECT count(*) FROM telemetry").fetchone()
    connection.execute("SELECT * FROM success").fetchall()
    assert count >= last and rows >= count, (count, rows, last)
    last, looks = count, looks + 1
print(last, looks)
"""


def test_any_sqlite_tool_reads_while_it_is_written(path: Path) -> None:
    """Another process with plain sqlite3 sees whole batches, growing, and no error."""
    writer = LogWriter.open(path, OPENED, limits=QUICK)
    watching = subprocess.Popen(
        [sys.executable, "-c", WATCH, str(path), "3000"], stdout=subprocess.PIPE, text=True
    )
    assert watching.stdout is not None
    assert watching.stdout.readline() == "watching\n"
    for number in range(1, 3_001):
        writer.append(number, bytes_in(number), [telemetry(number)])
        if number % 100 == 0:
            time.sleep(0.01)
    output, _ = watching.communicate(timeout=30)
    writer.close("closed", CLOSED_UTC)
    assert watching.returncode == 0
    last, looks = output.split()
    assert last == "3000"
    assert int(looks) > 3
    assert writer.trouble() == ""


def test_two_processes_record_two_sessions_of_one_log(path: Path) -> None:
    program = (
        "import sys; from pathlib import Path; from storage.writer import LogWriter;"
        "from tests.support.log_samples import *; w = LogWriter.open(Path(sys.argv[1]), OPENED);"
        "bad = []; [w.commit(n, bytes_in(n), [telemetry(n)], lambda y: y and bad.append(y))"
        " for n in range(1, 401)]; w.close('closed', CLOSED_UTC); print(len(bad))"
    )
    running = [
        subprocess.Popen(
            [sys.executable, "-c", program, str(path)], stdout=subprocess.PIPE, text=True, env=ENV
        )
        for _ in range(2)
    ]
    outputs = [each.communicate(timeout=30)[0].strip() for each in running]
    assert outputs == ["0", "0"]
    found = ask(path, "SELECT session, count(*), max(record) FROM wire GROUP BY session")
    assert found == [(1, 400, 400), (2, 400, 400)]
    assert ask(path, "SELECT ending FROM sessions") == [("closed",), ("closed",)]


@pytest.mark.parametrize("content", ["notes, but no database " * 100, "x" * 300, "xy"])
def test_opening_what_is_no_log(path: Path, content: str) -> None:
    path.parent.mkdir()
    path.write_text(content)
    with pytest.raises(LogUnavailableError, match="no SQLite database"):
        LogWriter.open(path, OPENED)
    assert path.read_text() == content


def test_opening_where_nothing_can_be_written(path: Path) -> None:
    def refuse(path: Path, mode: str) -> sqlite3.Connection:
        return sqlite3.connect(f"{path.as_uri()}?mode=ro", uri=True, isolation_level=None)

    LogWriter.open(path, OPENED).close("closed", CLOSED_UTC)
    with pytest.raises(LogUnavailableError, match="read-only"):
        LogWriter.open(path, OPENED, connect=refuse)
    with pytest.raises(LogUnavailableError, match="cannot be opened"):
        LogWriter.open(path.parent, OPENED)
