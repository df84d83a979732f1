"""Owners: who records a session now, told by a lock that dies with its process.

Beside the log lies one empty file for each session being recorded, named after the session's
uid, and the recording process holds SQLite's exclusive lock on it. The operating system drops
that lock when the process ends, however it ends; a process number kept in a column could come
to belong to another process. SQLite's lock, since it is the same on every system.
"""

import sqlite3
from contextlib import suppress
from pathlib import Path

from storage.connect import explain, primary_code
from storage.errors import LogUnavailableError


def owner_file(path: Path, uid: str) -> Path:
    """Return where the lock of the session ``uid`` lies, beside the log at ``path``."""
    return path.with_name(f"{path.name}-owner-{uid}")


class SessionOwner:
    """Holds the lock of one session until released. Raises LogUnavailableError if it cannot."""

    def __init__(self, path: Path, uid: str) -> None:
        self._file = owner_file(path, uid)
        try:
            self._connection = _connect(self._file, "rwc")
        except sqlite3.Error as error:
            raise LogUnavailableError(explain(error, self._file)) from error
        try:
            _lock(self._connection)
        except sqlite3.Error as error:
            self._connection.close()
            raise LogUnavailableError(explain(error, self._file)) from error

    def release(self) -> None:
        """Give the lock up and remove its file. Safe to call twice."""
        self._connection.close()
        _remove(self._file)


def owner_lives(path: Path, uid: str) -> bool:
    """Say whether some process, this one included, still records the session ``uid``."""
    try:
        connection = _connect(owner_file(path, uid), "rw")
    except sqlite3.OperationalError:
        return False
    try:
        _lock(connection)
    except sqlite3.OperationalError as error:
        return primary_code(error) == sqlite3.SQLITE_BUSY
    finally:
        connection.close()
    return False


def forget_owner(path: Path, uid: str) -> None:
    """Remove the lock file that a dead owner left."""
    _remove(owner_file(path, uid))


def _remove(file: Path) -> None:
    """An empty file that cannot be removed, say because another process looks at it on Windows,
    harms nobody: nothing but its lock means anything."""
    with suppress(OSError):
        file.unlink(missing_ok=True)


def _connect(file: Path, mode: str) -> sqlite3.Connection:
    return sqlite3.connect(
        f"{file.absolute().as_uri()}?mode={mode}",
        uri=True,
        timeout=0,
        isolation_level=None,
        check_same_thread=False,
    )


def _lock(connection: sqlite3.Connection) -> None:
    connection.execute("PRAGMA journal_mode = MEMORY")  # or a second file would lie beside it
    connection.execute("BEGIN EXCLUSIVE")
