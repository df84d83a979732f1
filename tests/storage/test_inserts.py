"""Entries reach their tables in order, each key's last row staying."""

import sqlite3
from collections.abc import Iterator
from enum import IntEnum, StrEnum
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from storage.inserts import Entry, Inserter, columns_of, group
from storage.records import BytesIn, BytesOut
from storage.rows import TABLES, ModuleRow, RemarkRow, TelemetryRow
from storage.schema import open_log
from tests.support.log_samples import any_row, bytes_in, expired, module_row, motion_rows, telemetry


@pytest.fixture
def connection(tmp_path: Path) -> Iterator[sqlite3.Connection]:
    opened = open_log(tmp_path / "fleet.db")
    yield opened
    opened.close()


def count(connection: sqlite3.Connection, table: str) -> int:
    return int(connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0])


def test_entries_are_sorted_by_table() -> None:
    entries: list[Entry] = [
        (1, BytesIn(10, 2, b"in"), [telemetry(1), telemetry(1, 1)]),
        (2, BytesOut(20, 3, b"out"), []),
        (3, expired(3), [module_row(1, "birch"), telemetry(3)]),
    ]
    assert group(entries) == {
        "wire": [(1, 10, 2, 0, b"in"), (2, 20, 3, 1, b"out")],
        "records": [(3, 3_000_000, "CommandExpired", '{"command":3}')],
        "telemetry": [telemetry(1), telemetry(1, 1), telemetry(3)],
        "modules": [module_row(1, "birch")],
    }


def test_nothing_makes_no_groups() -> None:
    assert group([]) == {}


def test_a_row_without_a_table_is_a_fault() -> None:
    with pytest.raises(KeyError):
        group([(1, expired(1), [(1, 2, 3)])])  # type: ignore[list-item]


@pytest.mark.parametrize("rows", [0, 1, 7, 8, 9, 63, 64, 65, 200, 1000])
def test_every_row_arrives_whatever_their_number(connection: sqlite3.Connection, rows: int) -> None:
    expected = [telemetry(1, part) for part in range(rows)]
    Inserter(5).insert(connection, group([(1, expired(1), expected)]))
    found = connection.execute("SELECT * FROM telemetry ORDER BY record, part").fetchall()
    assert found == [(5, *row) for row in expected]


@pytest.mark.parametrize("row_type", TABLES)
def test_columns_are_named_so_that_their_order_in_the_file_is_free(row_type: Any) -> None:
    assert columns_of(TABLES[row_type].name) == row_type._fields


def test_the_last_row_of_a_key_stays(connection: sqlite3.Connection) -> None:
    rows = [module_row(each % 3, f"name {each}") for each in range(100)]
    Inserter(1).insert(connection, group([(1, expired(1), rows)]))
    found = connection.execute("SELECT module, name FROM modules ORDER BY module").fetchall()
    assert found == [(0, "name 99"), (1, "name 97"), (2, "name 98")]


def test_writing_the_same_again_changes_nothing(connection: sqlite3.Connection) -> None:
    """An attempt whose end is unknown is repeated; nothing may then be there twice."""
    entries: list[Entry] = [(each, bytes_in(each), [telemetry(each)]) for each in range(90)]
    for _ in range(2):
        Inserter(1).insert(connection, group(entries))
    assert count(connection, "wire") == count(connection, "telemetry") == 90


def test_sessions_do_not_touch_each_other(connection: sqlite3.Connection) -> None:
    for session in (1, 2):
        rows = [module_row(1, f"session {session}")]
        Inserter(session).insert(connection, group([(1, bytes_in(session), rows)]))
    names = connection.execute("SELECT session, name FROM modules ORDER BY session").fetchall()
    assert names == [(1, "session 1"), (2, "session 2")]
    assert count(connection, "wire") == 2


def test_a_schema_can_stand_before_the_table(connection: sqlite3.Connection) -> None:
    connection.execute(f"CREATE TEMP TABLE remarks (session, {','.join(RemarkRow._fields)})")
    row = RemarkRow(1, 2, "u", "Jo", "text")
    Inserter(1, "temp.").insert(connection, {"remarks": [row]})
    assert count(connection, "temp.remarks") == 1
    assert count(connection, "main.remarks") == 0


def test_what_no_column_takes_is_refused(connection: sqlite3.Connection) -> None:
    bad = telemetry(1)._replace(battery_mV=None)  # type: ignore[arg-type]
    with pytest.raises(sqlite3.IntegrityError):
        Inserter(1).insert(connection, group([(1, expired(1), [bad])]))


def test_a_number_beyond_64_bits_is_refused(connection: sqlite3.Connection) -> None:
    bad = telemetry(1)._replace(t_ns=2**63)
    with pytest.raises(OverflowError):
        Inserter(1).insert(connection, group([(1, expired(1), [bad])]))


@settings(max_examples=60, deadline=None)
@given(st.lists(any_row(), max_size=120))
def test_tables_end_as_a_dictionary_by_key_would(rows: list[Any]) -> None:
    """The model: one dictionary a table, later rows over earlier ones."""
    connection = model_log()
    Inserter(1).insert(connection, group([(1, expired(1), rows)]))
    model: dict[str, dict[tuple[Any, ...], tuple[Any, ...]]] = {}
    for row in rows:
        table = TABLES[type(row)]
        key = tuple(getattr(row, name) for name in table.key)
        model.setdefault(table.name, {})[key] = tuple(row)
    for row_type, table in TABLES.items():
        columns, key_names = ",".join(row_type._fields), ",".join(table.key)
        found = connection.execute(f"SELECT {columns} FROM {table.name} ORDER BY {key_names}")
        expected = model.get(table.name, {})
        assert found.fetchall() == [expected[key] for key in sorted(expected)]
    connection.close()


def model_log() -> sqlite3.Connection:
    """The tables in memory, without any file."""
    from storage.later_tables import SECOND_TABLES
    from storage.tables import FIRST_TABLES

    connection = sqlite3.connect(":memory:")
    for statement in FIRST_TABLES + SECOND_TABLES:
        connection.execute(statement)
    return connection


@pytest.mark.parametrize("rows", [1, 9, 130])
def test_an_older_sqlite_binds_fewer_values(connection: sqlite3.Connection, rows: int) -> None:
    """999 before SQLite 3.32; 64 rows of 14 values are 896, of commands' 24 are 1,536."""
    connection.setlimit(sqlite3.SQLITE_LIMIT_VARIABLE_NUMBER, 999)
    commands = [motion_rows(command, "landed")[1] for command in range(rows)]
    Inserter(1).insert(connection, group([(1, expired(1), commands)]))
    assert count(connection, "commands") == rows


def test_enums_and_truth_values_are_stored_plainly(connection: sqlite3.Connection) -> None:
    """The console's outcomes and codes are enums; an SQL tool must see their values."""

    class Word(StrEnum):
        BIRCH = "birch"

    class Count(IntEnum):
        THREE = 3

    row = module_row(1, Word.BIRCH)._replace(firmware=Count.THREE, simulated=True)
    Inserter(1).insert(connection, group([(1, expired(1), [row])]))
    found = connection.execute(
        "SELECT name, typeof(name), firmware, typeof(firmware), simulated FROM modules"
    ).fetchone()
    assert found == ("birch", "text", 3, "integer", 1)


def test_row_types_of_a_batch_may_be_mixed(connection: sqlite3.Connection) -> None:
    rows = [telemetry(1), module_row(1, "birch"), telemetry(1, 1), module_row(2, "elm")]
    Inserter(1).insert(connection, group([(1, expired(1), rows)]))
    assert count(connection, "telemetry") == 2
    assert count(connection, "modules") == 2
    assert {type(row) for row in rows} == {TelemetryRow, ModuleRow}
