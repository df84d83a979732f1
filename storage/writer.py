"""Log writer: takes records at any time, writes them on a thread of its own.

Owns the backlog in memory, the thread, and the promise of a commit. While the disk does not
take anything, everything waits in the backlog and is tried again; what goes beyond the
backlog's limit is counted, and the count is written once writing works again. Knows no tables.
"""

import sys
import threading
import time
from collections import deque
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import islice
from pathlib import Path
from typing import Final

from storage.connect import Connect, connect_to_write
from storage.errors import LogUnavailableError, StorageMisuseError
from storage.inserts import Entry
from storage.log_file import LogFile, Refused
from storage.records import Record, SessionOpened
from storage.rows import Row

Done = Callable[[str], None]

_LOST: Final = "the record was lost, because the memory for waiting records is full"

BATCH_ENTRIES: Final = 5_000
"""Entries a transaction takes at most, so that a commit never waits behind a long one."""


@dataclass(frozen=True, slots=True)
class WriterLimits:
    """``batch_s``: how long an entry waits for others. ``retry_s``: between two attempts on a
    disk that fails. ``backlog_rows``: records and rows held in memory at most; 500,000 are
    some 190 MB, or eight minutes of a hundred modules at five messages a second."""

    batch_s: float = 0.1
    retry_s: float = 1.0
    backlog_rows: int = 500_000


class LogWriter:
    """One session being recorded. Methods may be called from any thread; none waits for the
    disk but ``open`` and ``close``."""

    def __init__(self, log: LogFile, limits: WriterLimits) -> None:
        self._log = log
        self._limits = limits
        self._wake = threading.Condition()
        self._backlog: deque[Entry] = deque()
        self._weight = 0
        self._taken = 0
        self._written = 0
        self._commits: deque[tuple[int, str, Done]] = deque()
        """Due once so many entries are written; why not, where that is known already."""
        self._lost_records = 0
        self._lost_rows = 0
        self._full = False
        self._failure = ""
        self._retry_at_s = 0.0
        self._closing: tuple[str, str] | None = None
        self._ended = False
        self._thread = threading.Thread(target=self._run, name="log writer", daemon=True)

    @classmethod
    def open(
        cls,
        path: Path,
        opened: SessionOpened,
        *,
        limits: WriterLimits | None = None,
        connect: Connect = connect_to_write,
    ) -> "LogWriter":
        """Open the log at ``path``, made with its folder where missing, and enter a session.

        The record ``opened`` itself is the caller's to append. Sessions whose process has gone
        without closing them are marked 'cut off'. ``connect`` opens the file (tests put a
        failing one in). Raises LogUnavailableError with one line: full, read-only, locked, not
        a log of ours, written by a newer version.
        """
        writer = cls(LogFile.open(path, opened, connect), limits or WriterLimits())
        writer._thread.start()
        return writer

    @property
    def session(self) -> int:
        """Number of this session in the log."""
        return self._log.session

    def append(self, number: int, record: Record, rows: Sequence[Row]) -> None:
        """Take a record and its rows; they are written within 200 ms where the disk allows.

        Never waits for the disk. ``rows`` must not be changed afterwards. Raises
        StorageMisuseError after ``close``.
        """
        with self._wake:
            self._take(number, record, rows)

    def commit(self, number: int, record: Record, rows: Sequence[Row], done: Done) -> None:
        """Take a record that must be durable, together with all appended before it.

        ``done("")`` is called on the writer's thread once it is on the disk, ``done(reason)``
        as soon as it is known that it cannot be. Even then the record stays in its place in the
        backlog, since the fleet has seen it: do not append it again. Raises StorageMisuseError
        after ``close``.
        """
        with self._wake:
            taken = self._take(number, record, rows)
            ended = self._ended
            if not ended:
                self._commits.append((self._taken, "" if taken else _LOST, done))
                self._wake.notify()
        if ended:
            done(self._failure)

    def trouble(self) -> str:
        """Say why nothing is written now and how much waits, or return an empty text."""
        failure, lost = self._failure, self._lost_records
        full = self._full
        if not failure and not full:
            return ""
        text = failure or "the disk is slower than the records come"
        text += f"; {len(self._backlog)} records wait in memory"
        return f"{text}, which is full: {lost} records lost" if full else text

    def close(self, ending: str, utc: str) -> None:
        """Write what waits, mark the session's end, end the thread. A second call does nothing.

        Raises LogUnavailableError where that fails, saying how much was not written; the
        session then counts as cut off.
        """
        with self._wake:
            if self._closing is not None:
                return
            self._closing = (ending, utc)
            self._wake.notify()
        self._thread.join()
        if self._failure:
            raise LogUnavailableError(f"{self._failure}; {len(self._backlog)} records not written")

    def _take(self, number: int, record: Record, rows: Sequence[Row]) -> bool:
        """Put an entry in the backlog, or count it as lost; under the lock."""
        if self._closing is not None:
            raise StorageMisuseError("the log is closed; no more records can be written")
        weight = 1 + len(rows)
        if self._ended or self._weight + weight > self._limits.backlog_rows:
            self._lost_records += 1
            self._lost_rows += len(rows)
            self._full = True
            return False
        self._weight += weight
        self._taken += 1
        self._backlog.append((number, record, rows))
        if len(self._backlog) in (1, BATCH_ENTRIES):
            self._wake.notify()
        return True

    # -- the writer's thread ---------------------------------------------------------------

    def _run(self) -> None:
        """Write until closed. An error that nobody foresaw must not end the log in silence."""
        try:
            while self._await_work():
                self._turn()
            self._finish()
        except Exception as error:
            with self._wake:
                self._ended = True
                self._failure = f"the log's writer failed: {error!r}; close this session"
                due = self._due(self._taken, self._failure)
            self._answer(due)
            raise
        finally:
            self._log.close()

    def _await_work(self) -> bool:
        """Wait until something is to be done now; False when the end is asked for."""
        with self._wake:
            gather_until_s = None
            while self._closing is None:
                now_s = time.monotonic()
                if self._failure:
                    if self._commits or now_s >= self._retry_at_s:
                        return True
                    wait_s: float | None = self._retry_at_s - now_s
                elif self._commits or len(self._backlog) >= BATCH_ENTRIES:
                    return True
                elif self._backlog:
                    gather_until_s = gather_until_s or now_s + self._limits.batch_s
                    wait_s = gather_until_s - now_s
                    if wait_s <= 0:
                        return True
                else:
                    wait_s = None
                self._wake.wait(wait_s)
            return False

    def _turn(self) -> None:
        """Write one batch; while the disk fails, only refuse commits until the next attempt."""
        if self._failure and time.monotonic() < self._retry_at_s:
            with self._wake:
                due = self._due(self._taken, self._failure)
            self._answer(due)
            return
        self._write_batch()

    def _write_batch(self) -> bool:
        """Write the oldest entries and answer their commits; False where the disk fails."""
        with self._wake:
            batch = list(islice(self._backlog, BATCH_ENTRIES))
            end = self._written + len(batch)
            durable = bool(self._commits) and self._commits[0][0] <= end
            lost = (self._lost_records, self._lost_rows)
        try:
            self._settle(batch, self._log.write(batch, durable, *lost))
            self._log.checkpoint()
        except LogUnavailableError as error:
            self._fail(str(error))
            return False
        return True

    def _fail(self, why: str) -> None:
        with self._wake:
            self._failure = why
            self._retry_at_s = time.monotonic() + self._limits.retry_s
            due = self._due(self._taken, why)
        self._answer(due)

    def _settle(self, batch: Sequence[Entry], refused: Refused) -> None:
        """Let go of what is written, and answer the commits among it."""
        with self._wake:
            first = self._written + 1
            for _, _, rows in batch:
                self._backlog.popleft()
                self._weight -= 1 + len(rows)
            self._written += len(batch)
            self._lost_records += len(refused.records)
            self._lost_rows += sum(len(batch[position][2]) for position in refused.rows)
            self._failure = ""
            self._full = False
            due = self._due(self._written, "")
        reasons = {first + at: why for at, why in (refused.rows | refused.records).items()}
        self._answer([(at, why_not or reasons.get(at, ""), done) for at, why_not, done in due])

    def _due(self, written: int, why_not: str) -> list[tuple[int, str, Done]]:
        """Take out the commits that wait for no more than ``written`` entries; under the lock."""
        due = []
        while self._commits and self._commits[0][0] <= written:
            at, lost, done = self._commits.popleft()
            due.append((at, lost or why_not, done))
        return due

    def _answer(self, due: Sequence[tuple[int, str, Done]]) -> None:
        """Call back without the lock; a caller's error is reported as any thread's would be."""
        for _, why_not, done in due:
            try:
                done(why_not)
            except Exception:  # noqa: BLE001  (whatever it is, the log must go on)
                kind, error, trace = sys.exc_info()
                if kind is not None:
                    threading.excepthook(
                        threading.ExceptHookArgs((kind, error, trace, self._thread))
                    )

    def _finish(self) -> None:
        """Write all that waits and the session's end; one failed attempt ends it."""
        while self._backlog:
            if not self._write_batch():
                return
        self._answer(self._due(self._taken, ""))
        ending, utc = self._closing or ("", "")
        try:
            self._log.end(ending, utc, self._lost_records, self._lost_rows)
        except LogUnavailableError as error:
            self._fail(str(error))
