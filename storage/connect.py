"""Connections: how the log's file is opened, and what an SQLite error means to a person.

Owns URI modes, waiting times and the one clear line that stands for each error code. Knows no
tables. Nothing in the project may open the log's file by any other way than SQLite: closing
any plain file handle on it drops this process's POSIX locks, and with them SQLite's.
"""

import sqlite3
from collections.abc import Callable
from pathlib import Path
from typing import Final

from storage.errors import LogUnavailableError

BUSY_S: Final = 2.0
"""How long a statement waits for another process's transaction before it counts as locked."""

Connect = Callable[[Path, str], sqlite3.Connection]
"""Opens a path in an SQLite URI mode (``rwc``, ``rw``); tests put failing ones in its place."""

_SENTENCES: Final[dict[int, str]] = {
    sqlite3.SQLITE_FULL: "the disk that holds {path} is full; free some space",
    sqlite3.SQLITE_IOERR_SHMSIZE: "the disk that holds {path} is full; free some space",
    sqlite3.SQLITE_READONLY: "{path} is read-only; allow writing, or choose another file",
    sqlite3.SQLITE_CANTOPEN: "{path} cannot be opened; see that its folder may be written",
    sqlite3.SQLITE_PERM: "{path} may not be opened; see its permissions",
    sqlite3.SQLITE_BUSY: "{path} is locked by another program; close that one",
    sqlite3.SQLITE_LOCKED: "{path} is locked by another program; close that one",
    sqlite3.SQLITE_NOTADB: "{path} is no SQLite database; choose another file",
    sqlite3.SQLITE_CORRUPT: "{path} is damaged ({error}); keep it aside and choose another file",
    sqlite3.SQLITE_IOERR: "{path}: reading or writing failed ({error}); look at the disk",
}

_NO_ROOM_BESIDE: Final = frozenset(
    {sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_READONLY, sqlite3.SQLITE_IOERR_SHMSIZE}
)
"""What reading fails with where the shared-memory file cannot be made, the last on a full disk."""


def primary_code(error: BaseException) -> int:
    """Return SQLite's primary result code of an error, or 0 where it has none."""
    return _extended_code(error) & 0xFF


def _extended_code(error: BaseException) -> int:
    return getattr(error, "sqlite_errorcode", 0)


def explain(error: sqlite3.Error | OSError, path: Path) -> str:
    """Say in one line what an error means for the log at ``path`` and what to do."""
    if isinstance(error, OSError):
        return f"{path} cannot be used: {error.strerror or error}"
    unknown = "{path} does not work: {error}"
    sentence = _SENTENCES.get(_extended_code(error)) or _SENTENCES.get(primary_code(error), unknown)
    return sentence.format(path=path, error=" ".join(str(error).split()))


def read_only(path: Path) -> str:
    """Say in one line that the log at ``path`` may not be written."""
    return _SENTENCES[sqlite3.SQLITE_READONLY].format(path=path)


def connect_to_write(path: Path, mode: str) -> sqlite3.Connection:
    """Open a connection without implicit transactions, usable from any one thread at a time.

    ``mode``: ``rwc`` makes the file where it is missing, ``rw`` does not. Raises sqlite3.Error.
    """
    connection = sqlite3.connect(
        f"{path.absolute().as_uri()}?mode={mode}",
        uri=True,
        timeout=BUSY_S,
        isolation_level=None,
        check_same_thread=False,
    )
    connection.execute("PRAGMA fullfsync = ON")  # macOS: fsync alone stops at the drive
    return connection


def connect_to_read(path: Path) -> sqlite3.Connection:
    """Open a connection that cannot write. Raises LogUnavailableError with one line.

    A log in WAL mode on a medium that cannot be written, or that is full, has nowhere to put its
    shared-memory file. Where nothing lies in a WAL beside it, it is read as it stands.
    """
    if not path.is_file():
        raise LogUnavailableError(f"there is no log at {path}")
    path = path.resolve()  # the WAL lies beside the file itself, not beside a link to it
    attempts = ["mode=ro"] if _in_wal(path) else ["mode=ro", "mode=ro&immutable=1"]
    for attempt in attempts:
        connection = sqlite3.connect(
            f"{path.as_uri()}?{attempt}",
            uri=True,
            timeout=BUSY_S,
            isolation_level=None,
            check_same_thread=False,
        )
        try:
            connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
        except sqlite3.Error as error:
            connection.close()
            codes = {primary_code(error), _extended_code(error)}
            if not codes & _NO_ROOM_BESIDE or attempt == attempts[-1]:
                raise LogUnavailableError(explain(error, path)) from error
        else:
            return connection
    raise LogUnavailableError(f"{path} cannot be opened")


def _in_wal(path: Path) -> bool:
    """Whether a WAL with anything in it lies beside the log."""
    try:
        return path.with_name(path.name + "-wal").stat().st_size > 0
    except FileNotFoundError:
        return False
