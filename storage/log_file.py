"""Log file: the writing side of one session on the disk, one transaction at a time.

Owns the connection, the sessions row and the owner's lock. Every failure leaves as
LogUnavailableError with one clear line, and a failed write leaves nothing half done. Knows no
threads and keeps nothing in memory; writer.py does.
"""

import os
import sqlite3
import uuid
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Final

from storage.connect import Connect, explain, primary_code
from storage.errors import LogUnavailableError
from storage.inserts import Entry, Inserter, group
from storage.owner import SessionOwner, forget_owner, owner_lives
from storage.records import SessionOpened
from storage.schema import open_log

CHECKPOINT_ROWS: Final = 20_000
"""Rows after which the WAL is copied into the file: some 4 MB. Done here between batches and
not by SQLite within a commit, because a command waits for its commit."""

_UNFIT: Final = (
    sqlite3.IntegrityError,
    sqlite3.InterfaceError,
    sqlite3.ProgrammingError,
    sqlite3.DataError,
    ArithmeticError,
    AttributeError,
    LookupError,
    TypeError,
    ValueError,
)
"""What a value that no column takes raises; trying again would not help."""

_CONNECTION_FIT: Final = frozenset(
    {sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED, sqlite3.SQLITE_FULL}
)
"""Failures after which the connection goes on working; after others it is opened anew."""


@dataclass(slots=True)
class Refused:
    """What a write left out because no column takes it: position among the entries, and why."""

    records: dict[int, str] = field(default_factory=dict)
    rows: dict[int, str] = field(default_factory=dict)


class LogFile:
    """One session's place in the log, open for writing. Use from one thread at a time."""

    def __init__(
        self,
        path: Path,
        connection: sqlite3.Connection,
        connect: Connect,
        owner: SessionOwner,
        session: int,
    ) -> None:
        self.path = path
        self.session = session
        self._connection = connection
        self._connect = connect
        self._owner = owner
        self._inserter = Inserter(session)
        self._identity = _file_identity(path)
        self._synchronous = ""
        self._renew = False
        self._since_checkpoint = 0
        self._tune()

    @classmethod
    def open(cls, path: Path, opened: SessionOpened, connect: Connect) -> "LogFile":
        """Open or make the log and enter a new session. Raises LogUnavailableError."""
        path = path.resolve()
        connection = open_log(path, connect)
        owner = None
        try:
            uid = uuid.uuid4().hex
            owner = SessionOwner(path, uid)
            session = _enter_session(connection, path, uid, opened)
            return cls(path, connection, connect, owner, session)
        except BaseException as error:
            connection.close()
            if owner is not None:
                owner.release()
            if isinstance(error, sqlite3.Error | OSError):
                raise LogUnavailableError(explain(error, path)) from error
            raise

    def write(
        self, entries: Sequence[Entry], durable: bool, lost_records: int, lost_rows: int
    ) -> Refused:
        """Write all entries in one transaction; with ``durable`` it is on the disk on return.

        ``lost_records`` and ``lost_rows`` are the session's totals so far. Returns what no
        column takes; the rest is written all the same. Raises LogUnavailableError.
        """
        refused = Refused()
        try:
            self._make_ready()
            self._set_synchronous("FULL" if durable else "NORMAL")
            try:
                self._transact(entries, lost_records, lost_rows)
            except _UNFIT:
                refused = self._transact_singly(entries, lost_records, lost_rows)
        except (sqlite3.Error, OSError) as error:
            raise self._failure(error) from error
        self._since_checkpoint += sum(1 + len(rows) for _, _, rows in entries)
        return refused

    def checkpoint(self) -> None:
        """Copy the WAL into the file where enough has come together.

        Readers are not waited for. Raises LogUnavailableError; nothing is lost by that.
        """
        if self._since_checkpoint < CHECKPOINT_ROWS:
            return
        try:
            self._connection.execute("PRAGMA wal_checkpoint(PASSIVE)").fetchone()
        except sqlite3.Error as error:
            raise self._failure(error) from error
        self._since_checkpoint = 0

    def end(self, ending: str, utc: str, lost_records: int, lost_rows: int) -> None:
        """Write how the session ended, durably. Raises LogUnavailableError."""
        try:
            self._make_ready()
            self._set_synchronous("FULL")
            self._connection.execute(
                "UPDATE sessions SET closed_utc = ?, ending = ?, lost_records = ?, lost_rows = ?"
                " WHERE session = ?",
                (utc, ending, lost_records, lost_rows, self.session),
            )
        except (sqlite3.Error, OSError) as error:
            raise self._failure(error) from error

    def close(self) -> None:
        """Close the file and give up the session. The last one out empties the WAL."""
        self._connection.close()
        self._owner.release()

    # -- within --------------------------------------------------------------------------

    def _tune(self) -> None:
        self._connection.execute("PRAGMA wal_autocheckpoint = 0")
        self._connection.execute("PRAGMA journal_size_limit = 16777216")
        self._synchronous = ""

    def _set_synchronous(self, level: str) -> None:
        """Set how far a commit waits for the disk; SQLite ignores this within a transaction."""
        if level != self._synchronous:
            self._connection.execute(f"PRAGMA synchronous = {level}")
            self._synchronous = level

    def _make_ready(self) -> None:
        """See that the path still leads to our file, and renew a connection that failed.

        On POSIX a deleted file takes writes without complaint; they would be gone at the end.
        """
        if _file_identity(self.path) != self._identity:
            raise LogUnavailableError(f"{self.path} was moved or replaced; put it back")
        if self._renew:
            fresh = self._connect(self.path, "rw")
            self._connection.close()
            self._connection = fresh
            self._tune()
            self._renew = False

    def _failure(self, error: sqlite3.Error | OSError) -> LogUnavailableError:
        if isinstance(error, sqlite3.Error) and primary_code(error) not in _CONNECTION_FIT:
            self._renew = True
        return LogUnavailableError(explain(error, self.path))

    def _transact(self, entries: Sequence[Entry], lost_records: int, lost_rows: int) -> None:
        groups = group(entries)
        connection = self._connection
        try:
            connection.execute("BEGIN IMMEDIATE")
            self._inserter.insert(connection, groups)
            if lost_records or lost_rows:
                self._note_losses(lost_records, lost_rows)
            connection.execute("COMMIT")
        finally:
            if connection.in_transaction:
                connection.execute("ROLLBACK")

    def _transact_singly(
        self, entries: Sequence[Entry], lost_records: int, lost_rows: int
    ) -> Refused:
        """Write entry by entry, to leave out only what no column takes."""
        refused = Refused()
        connection = self._connection
        try:
            connection.execute("BEGIN IMMEDIATE")
            for position, entry in enumerate(entries):
                self._insert_one(position, entry, refused)
            rows = sum(len(entries[position][2]) for position in refused.rows)
            self._note_losses(lost_records + len(refused.records), lost_rows + rows)
            connection.execute("COMMIT")
        finally:
            if connection.in_transaction:
                connection.execute("ROLLBACK")
        return refused

    def _insert_one(self, position: int, entry: Entry, refused: Refused) -> None:
        """Insert a record with its rows, or without them (they can be derived again), or not."""
        number, record, _ = entry
        attempts: tuple[tuple[Entry, dict[int, str]], ...] = (
            (entry, refused.rows),
            ((number, record, ()), refused.records),
        )
        for attempt, reasons in attempts:
            self._connection.execute("SAVEPOINT one")
            try:
                self._inserter.insert(self._connection, group([attempt]))
            except _UNFIT as error:
                reasons[position] = f"record {number} does not fit the log: {error}"
                self._connection.execute("ROLLBACK TO one")
            else:
                self._connection.execute("RELEASE one")
                return
            self._connection.execute("RELEASE one")

    def _note_losses(self, lost_records: int, lost_rows: int) -> None:
        self._connection.execute(
            "UPDATE sessions SET lost_records = ?, lost_rows = ? WHERE session = ?",
            (lost_records, lost_rows, self.session),
        )


def _file_identity(path: Path) -> tuple[int, int]:
    try:
        status = os.stat(path)
    except OSError as error:
        raise LogUnavailableError(f"{path} is gone; put it back") from error
    return status.st_dev, status.st_ino


def _enter_session(
    connection: sqlite3.Connection, path: Path, uid: str, opened: SessionOpened
) -> int:
    """Mark sessions whose process has gone as cut off, and enter the new one."""
    connection.execute("PRAGMA synchronous = FULL")
    connection.execute("BEGIN IMMEDIATE")
    try:
        still_open = connection.execute("SELECT session, uid FROM sessions WHERE ending = ''")
        gone = [each for each in still_open.fetchall() if not owner_lives(path, each[1])]
        for session, _ in gone:
            connection.execute(
                "UPDATE sessions SET ending = 'cut off' WHERE session = ?", (session,)
            )
        cursor = connection.execute(
            "INSERT INTO sessions (uid, opened_utc, opened_t_ns, operator, epoch, pace, program)"
            " VALUES (?, ?, ?, ?, ?, ?, ?)",
            (
                uid,
                opened.utc,
                opened.t_ns,
                _storable(opened.operator),
                opened.epoch,
                opened.pace,
                opened.program,
            ),
        )
        connection.execute("COMMIT")
    finally:
        if connection.in_transaction:
            connection.execute("ROLLBACK")
    for _, dead_uid in gone:
        forget_owner(path, dead_uid)
    if cursor.lastrowid is None:
        raise LogUnavailableError(f"{path} gave the new session no number")
    return cursor.lastrowid


def _storable(text: str) -> str:
    """A name from a shell in another encoding may hold what UTF-8 cannot; show it as '?'."""
    return text.encode(errors="replace").decode()
