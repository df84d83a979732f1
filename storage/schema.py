"""Schema: what makes an SQLite file a log of ours, and how an older one is brought up to date.

Owns the format mark, the list of migrations (kept by sqlite-utils in ``_sqlite_migrations``)
and the refusal of files that are not ours or too new. Knows no records and no rows.
sqlite-utils takes 0.3 s to import, so it is imported only where a migration is pending.
"""

import os
import sqlite3
import time
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, Final

from storage.connect import BUSY_S, Connect, connect_to_write, explain, primary_code, read_only
from storage.errors import LogUnavailableError
from storage.later_tables import SECOND_TABLES
from storage.tables import FIRST_TABLES
from storage.views import FIRST_VIEWS, SECOND_VIEWS

if TYPE_CHECKING:
    from sqlite_utils.migrations import Migrations

APPLICATION_ID: Final = 0x546D6257
"""Mark at byte 68 of the file, invented for this program; spells TmbW."""

MIGRATION_SET: Final = "tumblewire"

MIGRATIONS: Final[dict[str, tuple[str, ...]]] = {
    "0001_first_tables": FIRST_TABLES + FIRST_VIEWS,
    "0002_settings_traces_bridges": SECOND_TABLES + SECOND_VIEWS,
}
"""Name to statements, in order. One that has been released is never changed, only followed."""


def open_log(path: Path, connect: Connect = connect_to_write) -> sqlite3.Connection:
    """Open the log for writing: make folder and file where missing, migrate, set WAL mode.

    Raises LogUnavailableError with one line where that cannot be; another program's file is
    left as it was, and none is left that was not there before.
    """
    made = not path.exists()
    if not made and not os.access(path, os.W_OK):
        # SQLite would open it for reading only, and leave a WAL and an index beside it.
        raise LogUnavailableError(read_only(path))
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        connection = connect(path, "rwc")
    except (sqlite3.Error, OSError) as error:
        raise LogUnavailableError(explain(error, path)) from error
    try:
        _prepare(connection, path)
    except BaseException as error:
        connection.close()
        if made and primary_code(error) not in _OTHERS_WRITE:
            _remove_empty(path)
        if isinstance(error, sqlite3.Error):
            raise LogUnavailableError(explain(error, path)) from error
        raise
    return connection


_OTHERS_WRITE: Final = frozenset({sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED})
"""Failures that another process's writing is the reason of: an empty file may be its."""


def _remove_empty(path: Path) -> None:
    """Take away the empty file that a failed first opening leaves, say on a full disk."""
    with suppress(OSError):
        if path.stat().st_size == 0:
            path.unlink()


def check_ours(connection: sqlite3.Connection, path: Path) -> bool:
    """Say whether the file is a log that needs no migration; False where one is pending.

    A file without any content counts as a log still to be made. Raises LogUnavailableError for
    another program's database and for a log of a newer version.
    """
    (mark,) = connection.execute("PRAGMA application_id").fetchone()
    (objects,) = connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
    if mark == 0 and objects == 0:
        return False
    if mark != APPLICATION_ID:
        raise LogUnavailableError(f"{path} is another program's database; choose another file")
    done = _applied(connection)
    if newer := sorted(done - MIGRATIONS.keys()):
        raise LogUnavailableError(
            f"{path} was written by a newer version of this program ({newer[-1]}); update this one"
        )
    return done == MIGRATIONS.keys()


def check_readable(connection: sqlite3.Connection, path: Path) -> None:
    """Raise LogUnavailableError unless the file is a log in this version's layout."""
    try:
        ready = check_ours(connection, path)
    except sqlite3.Error as error:
        raise LogUnavailableError(explain(error, path)) from error
    if not ready:
        raise LogUnavailableError(
            f"{path} is empty or from an older version; recording into it brings it up to date"
        )


def _applied(connection: sqlite3.Connection) -> set[str]:
    table = connection.execute(
        "SELECT 1 FROM sqlite_master WHERE name = '_sqlite_migrations'"
    ).fetchone()
    if table is None:
        return set()
    rows = connection.execute(
        "SELECT name FROM _sqlite_migrations WHERE migration_set = ?", (MIGRATION_SET,)
    )
    return {name for (name,) in rows}


def _prepare(connection: sqlite3.Connection, path: Path) -> None:
    """Check, migrate, switch to WAL; wait where another process does the same just now.

    SQLite does not call its busy handler for a change of the journal's mode, hence the loop.
    """
    until = time.monotonic() + BUSY_S
    while True:
        try:
            if not check_ours(connection, path):
                _migrate(connection, path)
            (mode,) = connection.execute("PRAGMA journal_mode = WAL").fetchone()
        except sqlite3.OperationalError as error:
            if primary_code(error) != sqlite3.SQLITE_BUSY or time.monotonic() > until:
                raise
            time.sleep(0.02)
            continue
        if mode != "wal":
            raise LogUnavailableError(f"{path} lies where SQLite's WAL mode does not work")
        return


def _migrate(connection: sqlite3.Connection, path: Path) -> None:
    """Apply what is pending, mark included, in one transaction, so that no half log is left."""
    from sqlite_utils import Database

    connection.execute("BEGIN IMMEDIATE")
    try:
        if not check_ours(connection, path):
            connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
            database = Database(connection, recursive_triggers=False, execute_plugins=False)
            migrations().apply(database)
        connection.execute("COMMIT")
    finally:
        if connection.in_transaction:
            connection.execute("ROLLBACK")


def migrations() -> "Migrations":
    """Return the migrations as sqlite-utils applies them."""
    from sqlite_utils import Database
    from sqlite_utils.migrations import Migrations

    registered = Migrations(MIGRATION_SET)

    def register(name: str, statements: tuple[str, ...]) -> None:
        @registered(name=name)
        def run(database: Database) -> None:
            for statement in statements:
                database.execute(statement)

    for name, statements in MIGRATIONS.items():
        register(name, statements)
    return registered
