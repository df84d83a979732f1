"""Each SQLite error becomes one clear line, and reading never writes."""

import os
import shutil
import sqlite3
import subprocess
import sys
import tempfile
from pathlib import Path

import pytest

from storage.connect import connect_to_read, connect_to_write, explain, primary_code
from storage.errors import LogUnavailableError
from storage.schema import open_log


def error_with(code: int, text: str = "it\nfailed") -> sqlite3.OperationalError:
    error = sqlite3.OperationalError(text)
    error.sqlite_errorcode = code
    return error


@pytest.mark.parametrize(
    ("code", "word"),
    [
        (sqlite3.SQLITE_FULL, "full"),
        (sqlite3.SQLITE_IOERR_SHMSIZE, "full"),
        (sqlite3.SQLITE_READONLY, "read-only"),
        (sqlite3.SQLITE_READONLY | 5 << 8, "read-only"),
        (sqlite3.SQLITE_CANTOPEN, "cannot be opened"),
        (sqlite3.SQLITE_BUSY, "locked"),
        (sqlite3.SQLITE_BUSY | 2 << 8, "locked"),
        (sqlite3.SQLITE_NOTADB, "no SQLite database"),
        (sqlite3.SQLITE_CORRUPT, "damaged"),
        (sqlite3.SQLITE_IOERR | 3 << 8, "look at the disk"),
        (sqlite3.SQLITE_PERM, "permissions"),
        (sqlite3.SQLITE_ERROR, "does not work: it failed"),
    ],
)
def test_each_code_has_a_line(code: int, word: str) -> None:
    text = explain(error_with(code), Path("/logs/fleet.db"))
    assert word in text
    assert "/logs/fleet.db" in text
    assert "\n" not in text


def test_an_error_of_the_module_itself_has_a_line() -> None:
    error = sqlite3.ProgrammingError("Cannot operate on a closed database.")
    assert primary_code(error) == 0
    assert "closed database" in explain(error, Path("fleet.db"))


def test_an_error_of_the_system_has_a_line() -> None:
    text = explain(PermissionError(13, "Permission denied"), Path("fleet.db"))
    assert text == "fleet.db cannot be used: Permission denied"


def test_a_missing_log_is_not_made_by_reading(tmp_path: Path) -> None:
    with pytest.raises(LogUnavailableError, match="there is no log"):
        connect_to_read(tmp_path / "fleet.db")
    assert list(tmp_path.iterdir()) == []


def test_rw_does_not_make_a_file(tmp_path: Path) -> None:
    with pytest.raises(sqlite3.OperationalError):
        connect_to_write(tmp_path / "fleet.db", "rw").execute("SELECT 1 FROM sqlite_master")
    assert list(tmp_path.iterdir()) == []


def test_reading_cannot_write(tmp_path: Path) -> None:
    path = tmp_path / "fleet.db"
    open_log(path).close()
    connection = connect_to_read(path)
    with pytest.raises(sqlite3.OperationalError) as caught:
        connection.execute("DELETE FROM sessions")
    assert primary_code(caught.value) == sqlite3.SQLITE_READONLY
    connection.close()


def test_a_file_that_is_no_database_cannot_be_read(tmp_path: Path) -> None:
    path = tmp_path / "notes.txt"
    path.write_text("only notes, and more than a hundred bytes of them " * 50)
    with pytest.raises(LogUnavailableError, match="no SQLite database"):
        connect_to_read(path)


READ = """
import os, sys, urllib.parse
from pathlib import Path
from storage.errors import LogUnavailableError
from storage.reader import LogReader
from storage.schema import open_log
path = Path(sys.argv[1])
if os.getuid() == 0:
    os.setgroups([])
    os.setgid(65534)
    os.setuid(65534)
print(len(LogReader.open(path).sessions()))
try:
    open_log(path)
except LogUnavailableError as error:
    print(error)
"""


def test_a_log_on_a_medium_that_cannot_be_written() -> None:
    """As an unprivileged user (65534 is nobody), since no permission holds root back. Reading
    works without any file beside the log; writing is refused with one line."""
    if os.name != "posix":
        pytest.skip("needs POSIX permissions")
    folder = Path(tempfile.gettempdir()) / f"tumblewire-test-{os.getpid()}"
    folder.mkdir()
    try:
        path = folder / "fleet.db"
        open_log(path).close()
        path.chmod(0o444)
        folder.chmod(0o555)
        done = subprocess.run(
            [sys.executable, "-c", READ, str(path)],
            capture_output=True,
            text=True,
            check=False,
        )
        assert done.returncode == 0, done.stderr
        sessions, refusal = done.stdout.splitlines()
        assert sessions == "0"
        assert "read-only" in refusal or "cannot be opened" in refusal
        assert [each.name for each in folder.iterdir()] == ["fleet.db"]
    finally:
        folder.chmod(0o755)
        shutil.rmtree(folder)
