"""Rebuild: derived tables taken out or put in anew for one session.

Owns the exchange of a session's derived rows as one transaction. Does not know how rows are
derived; the caller folds the records and hands the rows over.
"""

import sqlite3
from collections.abc import Iterable, Iterator
from contextlib import closing, contextmanager
from itertools import islice
from pathlib import Path
from typing import Final

from storage.connect import connect_to_read, connect_to_write, explain
from storage.errors import LogUnavailableError, StorageMisuseError
from storage.inserts import Inserter, columns_of
from storage.owner import owner_lives
from storage.reader import DERIVED_TABLES
from storage.rows import TABLES, Row
from storage.schema import open_log

__all__ = ["DERIVED_TABLES", "delete_derived", "replace_derived", "tidy"]

_SPOOL_ROWS: Final = 10_000


def delete_derived(path: Path, session: int) -> None:
    """Delete all derived rows of a session; its records stay.

    Raises StorageMisuseError for a session that is not there or still being recorded, and
    LogUnavailableError.
    """
    with _exclusive(path, session) as connection:
        _delete(connection, session)


def replace_derived(path: Path, session: int, rows: Iterable[Row]) -> dict[str, int]:
    """Put ``rows`` in place of all derived rows of a session; return row counts by table.

    Of several rows with one key the last stays, as in a live session. One transaction: where
    anything fails, ``rows`` itself included, the old rows are still there. The rows are
    gathered in temporary tables first, so that other sessions of the log can be written
    meanwhile. Raises what delete_derived raises.
    """
    with _connection(path, session) as connection:
        _spool(connection, session, rows)
        with _transaction(connection, path, session):
            _delete(connection, session)
            for table in DERIVED_TABLES:
                columns = ", ".join(("session", *columns_of(table)))
                connection.execute(
                    f"INSERT INTO main.{table} ({columns}) SELECT {columns} FROM temp.{table}"
                )
            connection.execute("UPDATE sessions SET lost_rows = 0 WHERE session = ?", (session,))
        return {
            table: int(connection.execute(f"SELECT count(*) FROM temp.{table}").fetchone()[0])
            for table in DERIVED_TABLES
        }


def _spool(connection: sqlite3.Connection, session: int, rows: Iterable[Row]) -> None:
    """Gather rows in temporary tables of the same names, columns and keys."""
    for row_type, table in TABLES.items():
        columns, key = ", ".join(row_type._fields), ", ".join(("session", *table.key))
        connection.execute(
            f"CREATE TEMP TABLE {table.name} (session, {columns}, PRIMARY KEY ({key}))"
        )
    inserter = Inserter(session, "temp.")
    stream = iter(rows)
    connection.execute("BEGIN")
    while block := list(islice(stream, _SPOOL_ROWS)):
        groups: dict[str, list[tuple[object, ...]]] = {}
        for row in block:
            groups.setdefault(TABLES[type(row)].name, []).append(row)
        inserter.insert(connection, groups)
    connection.execute("COMMIT")


def _delete(connection: sqlite3.Connection, session: int) -> None:
    for table in DERIVED_TABLES:
        connection.execute(f"DELETE FROM main.{table} WHERE session = ?", (session,))


@contextmanager
def _exclusive(path: Path, session: int) -> Iterator[sqlite3.Connection]:
    with _connection(path, session) as connection, _transaction(connection, path, session):
        yield connection


@contextmanager
def _connection(path: Path, session: int) -> Iterator[sqlite3.Connection]:
    """A writing connection to a log that is there; SQLite's errors become one clear line."""
    connect_to_read(path).close()  # a missing file is refused, not made
    connection = open_log(path)
    try:
        _check_closed(connection, path, session)
        yield connection
    except sqlite3.Error as error:
        raise LogUnavailableError(explain(error, path)) from error
    finally:
        connection.close()


@contextmanager
def _transaction(connection: sqlite3.Connection, path: Path, session: int) -> Iterator[None]:
    connection.execute("PRAGMA synchronous = FULL")
    connection.execute("BEGIN IMMEDIATE")
    try:
        _check_closed(connection, path, session)
        yield
        connection.execute("COMMIT")
    finally:
        if connection.in_transaction:
            connection.execute("ROLLBACK")


def _check_closed(connection: sqlite3.Connection, path: Path, session: int) -> None:
    found = connection.execute(
        "SELECT uid, ending FROM sessions WHERE session = ?", (session,)
    ).fetchone()
    if found is None:
        raise StorageMisuseError(f"there is no session {session} in {path}")
    uid, ending = found
    if not ending and owner_lives(path.resolve(), uid):
        raise StorageMisuseError(f"session {session} is still being recorded; close it first")


def tidy(path: Path) -> None:
    """Copy the WAL into the file and empty it, as far as nobody else reads or writes.

    A reader that closes last cannot do that, and a person who then copies the file alone would
    leave behind what is in the WAL. Raises LogUnavailableError.
    """
    try:
        with closing(connect_to_write(path, "rw")) as connection:
            connection.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()
    except sqlite3.Error as error:
        raise LogUnavailableError(explain(error, path)) from error
