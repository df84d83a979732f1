"""Every row type has one table, and a key made of its own columns."""

from typing import Any

import pytest

from storage.rows import TABLES
from tests.support.log_samples import ROW_TYPES


def test_every_row_type_has_a_table() -> None:
    assert set(TABLES) == set(ROW_TYPES)
    assert len(TABLES) == 14


def test_no_two_share_a_table() -> None:
    names = [table.name for table in TABLES.values()]
    assert len(set(names)) == len(names)


@pytest.mark.parametrize("row_type", ROW_TYPES)
def test_keys_are_columns_at_the_front(row_type: Any) -> None:
    """A key at the front lets a row be read as key and rest."""
    key = TABLES[row_type].key
    assert row_type._fields[: len(key)] == key
    assert "session" not in row_type._fields


@pytest.mark.parametrize("row_type", ROW_TYPES)
def test_fields_are_of_types_that_sqlite_keeps(row_type: Any) -> None:
    kept = {int, str, float, bytes, int | None, str | None, float | None}
    assert set(row_type.__annotations__.values()) <= kept
