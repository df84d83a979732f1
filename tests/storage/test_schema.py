"""The file is a log of ours, in this version's layout, or it is refused and left alone."""

import sqlite3
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from storage.connect import connect_to_write
from storage.errors import LogUnavailableError
from storage.inserts import columns_of
from storage.reader import LogReader
from storage.rows import TABLES
from storage.schema import APPLICATION_ID, MIGRATION_SET, MIGRATIONS, migrations, open_log
from tests.support.log_samples import ROW_TYPES, ask

SQL_TYPES = {int: "INTEGER", str: "TEXT", float: "REAL", bytes: "BLOB"}


@pytest.fixture
def log(tmp_path: Path) -> Path:
    path = tmp_path / "fleet.db"
    open_log(path).close()
    return path


def declared(annotation: Any) -> tuple[str, int]:
    """SQL type and NOT NULL that an annotation of a row asks for."""
    for python_type, sql_type in SQL_TYPES.items():
        if annotation is python_type:
            return sql_type, 1
        if annotation == python_type | None:
            return sql_type, 0
    raise AssertionError(f"no column type for {annotation}")


@pytest.mark.parametrize("row_type", ROW_TYPES)
def test_columns_follow_the_row_type(row_type: Any, log: Path) -> None:
    """Names, order, types, NOT NULL and key, so that schema and rows cannot drift apart."""
    table = TABLES[row_type]
    columns = ask(log, f"PRAGMA table_info({table.name})")
    expected = [("session", "INTEGER", 1)]
    expected += [(name, *declared(hint)) for name, hint in row_type.__annotations__.items()]
    assert [(name, sql_type, not_null) for _, name, sql_type, not_null, _, _ in columns] == expected
    key = sorted((order, name) for _, name, _, _, _, order in columns if order)
    assert tuple(name for _, name in key) == ("session", *table.key)


@pytest.mark.parametrize("table", ["wire", "records"])
def test_columns_of_the_records_tables(table: str, log: Path) -> None:
    names = [column[1] for column in ask(log, f"PRAGMA table_info({table})")]
    assert names == ["session", *columns_of(table)]
    assert names[:3] == ["session", "record", "t_ns"]


def test_all_tables_and_views_are_there(log: Path) -> None:
    found = {name for (name,) in ask(log, "SELECT name FROM sqlite_master WHERE type = 'table'")}
    expected = {table.name for table in TABLES.values()} | {"sessions", "wire", "records"}
    assert expected <= found
    views = {name for (name,) in ask(log, "SELECT name FROM sqlite_master WHERE type = 'view'")}
    assert views == {
        *("motions_named", "trials_counted", "success"),
        *("settings_now", "trace_samples"),
    }


def test_fast_tables_keep_one_tree_only(log: Path) -> None:
    """Without rowid there is no second index beside the key."""
    indexes = ask(log, "SELECT tbl_name FROM sqlite_master WHERE type = 'index'")
    assert not {("telemetry",), ("wire",), ("commands",), ("motions",)} & set(indexes)


def test_the_mark_stands_where_the_file_format_puts_it(log: Path) -> None:
    """SQLite's file format, section 1.3: application id, big-endian, at offset 68."""
    raw = log.read_bytes()
    assert raw[:16] == b"SQLite format 3\0"
    assert raw[68:72] == b"TmbW"
    assert int.from_bytes(b"TmbW", "big") == APPLICATION_ID


def test_wal_mode_stays_with_the_file(log: Path) -> None:
    assert ask(log, "PRAGMA journal_mode") == [("wal",)]


def test_sqlite_utils_knows_what_was_applied(log: Path) -> None:
    database = pytest.importorskip("sqlite_utils").Database(log)
    assert [each.name for each in migrations().applied(database)] == list(MIGRATIONS)
    assert migrations().pending(database) == []
    database.conn.close()


def test_opening_again_changes_nothing(log: Path) -> None:
    before = ask(log, "SELECT type, name, sql FROM sqlite_master ORDER BY name")
    open_log(log).close()
    assert ask(log, "SELECT type, name, sql FROM sqlite_master ORDER BY name") == before


def test_opening_again_does_not_import_sqlite_utils(log: Path) -> None:
    program = (
        "import sys; from pathlib import Path; from storage.schema import open_log;"
        "open_log(Path(sys.argv[1])).close(); print('sqlite_utils' in sys.modules)"
    )
    done = subprocess.run(
        [sys.executable, "-c", program, str(log)], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "False"


def test_missing_folders_are_made(tmp_path: Path) -> None:
    path = tmp_path / "a" / "b" / "fleet.db"
    open_log(path).close()
    assert path.is_file()


def test_odd_characters_in_a_path_are_no_uri(tmp_path: Path) -> None:
    path = tmp_path / "50% of #2? – ü.db"
    open_log(path).close()
    assert path.is_file()
    assert [each.name for each in tmp_path.iterdir()] == [path.name]


def test_an_empty_file_becomes_a_log(tmp_path: Path) -> None:
    path = tmp_path / "empty.db"
    path.touch()
    open_log(path).close()
    assert ask(path, "SELECT count(*) FROM sessions") == [(0,)]


def refusal(path: Path) -> str:
    with pytest.raises(LogUnavailableError) as caught:
        open_log(path)
    text = str(caught.value)
    assert "\n" not in text
    assert str(path) in text
    return text


def test_a_file_that_is_no_database_is_left_alone(tmp_path: Path) -> None:
    path = tmp_path / "notes.txt"
    path.write_text("not a database, just a page of notes\n" * 100)
    before = path.read_bytes()
    assert "no SQLite database" in refusal(path)
    assert path.read_bytes() == before
    assert [each.name for each in tmp_path.iterdir()] == ["notes.txt"]


@pytest.mark.parametrize("mark", [0, 0x0F055112, -5])
def test_another_programs_database_is_left_alone(tmp_path: Path, mark: int) -> None:
    path = tmp_path / "other.db"
    connection = sqlite3.connect(path)
    connection.execute("CREATE TABLE letters (letter TEXT)")
    connection.execute(f"PRAGMA application_id = {mark}")
    connection.commit()
    connection.close()
    before = path.read_bytes()
    assert "another program" in refusal(path)
    assert path.read_bytes() == before


def test_a_marked_file_without_tables_counts_by_its_mark(tmp_path: Path) -> None:
    path = tmp_path / "other.db"
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA application_id = 7")
    connection.commit()
    connection.close()
    assert "another program" in refusal(path)


def test_a_newer_log_is_refused(log: Path) -> None:
    connection = sqlite3.connect(log)
    connection.execute(
        "INSERT INTO _sqlite_migrations (migration_set, name, applied_at)"
        " VALUES (?, '9999_later', 'then')",
        (MIGRATION_SET,),
    )
    connection.commit()
    connection.close()
    text = refusal(log)
    assert "newer version" in text
    assert "9999_later" in text


def test_migrations_of_another_set_are_nobodys_business(log: Path) -> None:
    connection = sqlite3.connect(log)
    connection.execute(
        "INSERT INTO _sqlite_migrations (migration_set, name, applied_at)"
        " VALUES ('my own notes', '0001', 'then')"
    )
    connection.commit()
    connection.close()
    open_log(log).close()


def test_an_older_log_is_brought_up_to_date(log: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    later = {**MIGRATIONS, "9998_trial": ("CREATE TABLE later (x)",)}
    monkeypatch.setattr("storage.schema.MIGRATIONS", later)
    open_log(log).close()
    assert ask(log, "SELECT count(*) FROM later") == [(0,)]
    names = ask(log, "SELECT name FROM _sqlite_migrations ORDER BY id")
    assert names == [(name,) for name in later]


FIRST_VALUES: dict[str, tuple[Any, ...]] = {
    "sessions": (
        1,
        "ab" * 16,
        "2026-03-02T08:00:00Z",
        5,
        None,
        "closed",
        "Mira",
        9,
        1.0,
        "x",
        0,
        0,
    ),
    "wire": (1, 1, 5, 0, 0, b"\x01\x02"),
    "records": (1, 2, 6, "CommandExpired", '{"command":1}'),
    "modules": (1, 1, "00000000000000a1", 0, 17, "birch", "paver", 3, 9000, 77, 1),
    "telemetry": (1, 1, 0, 5, 1, 77, 9, 4500, 0, 0, 1, 0, 3905, 2410, -3),
    "orders": (1, 1, 7, "typed", "birch pivot forward at 4350", 1),
    "commands": (
        *(1, 1, 1, 7, 1, "00000000000000a1", 77, 9, 101, "pivot", "floor", "forward", 4350, 0, 0),
        *(1, 0, "finished", None, 1, 9),
    ),
    "command_events": (1, 3, 0, 7, 1, "ordered", ""),
    "motions": (
        *(1, 1, 1, "pivot", "floor", "forward", 4350, 0, 0, "landed", 90.1, 95.0, 1, 2, 1, 410),
        *(4330, 41.5, 900, 350, 0.21),
    ),
    "link_events": (1, 4, 8, 0, "sim://", "open", ""),
    "sheets": (1, 1, 5, None, "morning", 7, 40, None, "[sheet]"),
    "alarms": (1, 5, 0, 8, None, "all-stop", "number 1"),
    "remarks": (1, 6, 8, "2026-03-02T08:01:00Z", "Mira", "belt slipped"),
    "corrections": (
        *(1, 7, 9, "2026-03-02T08:02:00Z", "00000000000000a1", 77, 101),
        *("short", "Mira", "saw it"),
    ),
}
"""A row of each table as the first migration made it, written down by hand."""

ADDED: dict[str, tuple[Any, ...]] = {
    "modules": (None,),
    "commands": (0, 0, "", 0),
    "motions": (None,),
}
"""What the rows of an older log hold in the columns that came later."""


def first_log(path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A log as the program's first version left it."""
    first = next(iter(MIGRATIONS))
    monkeypatch.setattr("storage.schema.MIGRATIONS", {first: MIGRATIONS[first]})
    connection = open_log(path)
    for table, values in FIRST_VALUES.items():
        connection.execute(f"INSERT INTO {table} VALUES ({','.join('?' * len(values))})", values)
    connection.close()
    monkeypatch.undo()
    return path


def test_a_first_log_opens_and_keeps_its_rows(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = first_log(tmp_path / "first.db", monkeypatch)
    with pytest.raises(LogUnavailableError, match="older version"):
        LogReader.open(path)
    open_log(path).close()
    for table, values in FIRST_VALUES.items():
        assert ask(path, f"SELECT * FROM {table}") == [values + ADDED.get(table, ())]
    assert ask(path, "SELECT module, outcome, corrected_by FROM motions_named") == [
        ("birch", "short", "Mira")
    ]
    new = {table.name for table in TABLES.values()} - FIRST_VALUES.keys()
    assert new == {"settings", "traces", "bridge_status"}
    assert all(ask(path, f"SELECT count(*) FROM {table}") == [(0,)] for table in new)


def test_a_first_log_is_read_as_any_other_once_opened(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = first_log(tmp_path / "first.db", monkeypatch)
    open_log(path).close()
    reader = LogReader.open(path)
    assert [record for record, _ in reader.records(1)] == [1, 2]
    assert [trial.outcome for trial in reader.trials(1)] == ["short"]
    assert reader.table("modules", 1)[0][-1] is None
    reader.close()


def test_a_log_brought_up_to_date_is_laid_out_as_a_new_one(
    log: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = first_log(tmp_path / "first.db", monkeypatch)
    open_log(path).close()
    for table in TABLES.values():
        layout = f"PRAGMA table_info({table.name})"
        assert ask(path, layout) == ask(log, layout)


def test_a_migration_that_fails_leaves_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "fleet.db"
    broken = {**MIGRATIONS, "9998_broken": ("CREATE TABLE half (x)", "CREATE TABLE half (x)")}
    monkeypatch.setattr("storage.schema.MIGRATIONS", broken)
    refusal(path)
    assert ask(path, "SELECT count(*) FROM sqlite_master") == [(0,)]
    monkeypatch.undo()
    open_log(path).close()
    assert ask(path, "SELECT count(*) FROM sessions") == [(0,)]


def test_a_disk_that_is_full_at_once_leaves_no_file(tmp_path: Path) -> None:
    """SQLite itself answers SQLITE_FULL where a file may have no more pages."""

    def full(path: Path, mode: str) -> sqlite3.Connection:
        connection = connect_to_write(path, mode)
        connection.execute("PRAGMA max_page_count = 1")
        return connection

    path = tmp_path / "fleet.db"
    with pytest.raises(LogUnavailableError, match="full"):
        open_log(path, full)
    assert list(tmp_path.iterdir()) == []
    path.touch()  # one that was there before stays
    with pytest.raises(LogUnavailableError, match="full"):
        open_log(path, full)
    assert list(tmp_path.iterdir()) == [path]


def test_a_folder_is_no_log(tmp_path: Path) -> None:
    assert "cannot be opened" in refusal(tmp_path)


def test_a_file_in_place_of_the_folder(tmp_path: Path) -> None:
    (tmp_path / "a").write_text("x")
    assert "cannot be used" in refusal(tmp_path / "a" / "fleet.db")


def test_many_processes_make_one_log_together(tmp_path: Path) -> None:
    path = tmp_path / "fleet.db"
    program = (
        "import sys; from pathlib import Path; from storage.schema import open_log;"
        "import sqlite_utils; sys.stdin.readline(); open_log(Path(sys.argv[1])).close()"
    )
    running = [
        subprocess.Popen(
            [sys.executable, "-c", program, str(path)],
            stdin=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        for _ in range(4)
    ]
    for each in running:
        assert each.stdin is not None
        each.stdin.write("go\n")
        each.stdin.flush()
    for each in running:
        _, errors = each.communicate(timeout=30)
        assert each.returncode == 0, errors
    assert ask(path, "SELECT count(*) FROM _sqlite_migrations") == [(len(MIGRATIONS),)]
