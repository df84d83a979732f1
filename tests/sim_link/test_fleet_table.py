"""Single values of a fleet file's tables: taken within their bounds, refused with place and key."""

import math
from collections.abc import Callable
from contextlib import nullcontext
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.errors import SimInputError
from sim_link.fleet_table import NAME, Table

ANYTHING = st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=14)


def table(value: object) -> Table:
    return Table({"key": value}, ("key", "other"), "hall.toml: module 3", "[[module]]")


@given(ANYTHING, st.integers(-9, 9), st.integers(0, 9))
def test_numbers_are_taken_within_their_bounds_and_nothing_else(
    value: Any, low: int, width: int
) -> None:
    span = low, low + width
    number = isinstance(value, int | float) and not isinstance(value, bool)
    fits = number and low <= value <= low + width
    read(lambda: table(value).number("key", span), fits, value)
    read(lambda: table(value).integer("key", span), fits and isinstance(value, int), value)
    read(lambda: table([value, low]).pair("key", span, (0.0, 0.0)), fits, (value, low))


def read(reading: Callable[[], object], fits: bool, value: object) -> None:
    """Read; the value comes back where it fits, else an error that names place and key."""
    if fits:
        assert reading() == value
        return
    with pytest.raises(SimInputError, match=r"^hall\.toml: module 3: key: .* needed$"):
        reading()


@given(st.text("abz09-#A é", max_size=14))
def test_a_name_is_at_most_twelve_small_letters_digits_and_hyphens(text: str) -> None:
    good = 1 <= len(text) <= 12 and set(text) <= set("abz09-") and text[0] in "abz"
    assert bool(NAME.fullmatch(text)) == good
    read(lambda: table(text).name("key"), good, text)
    with pytest.raises(SimInputError) if not good else nullcontext():
        assert table([text]).names("key", 1) == (text,)


@pytest.mark.parametrize("value", ["a", ["a", "a"], ["a", "b", "c"], [1], ["A"], {"a": 1}])
def test_a_list_of_names_is_short_and_has_none_twice(value: object) -> None:
    with pytest.raises(SimInputError, match="key: a list of at most 2 different names is needed"):
        table(value).names("key", 2)
    assert table(["b", "a"]).names("key", 2) == ("b", "a")


def test_what_is_left_out_has_its_default_or_must_be_given() -> None:
    empty = Table({}, ("key",), "hall.toml", "top")
    assert "key" not in empty
    assert (empty.get("key"), empty.tables("key")) == (None, [])
    assert (empty.names("key", 3), empty.some_of("key", ("a",))) == ((), ())
    assert (empty.integer("key", (1, 6), 2), empty.number("key", (0, 1), 0.5)) == (2, 0.5)
    assert empty.pair("key", (0, 9), (1.0, 2.0)) == (1.0, 2.0)
    for reading in (
        lambda: empty.integer("key", (1, 6)),
        lambda: empty.number("key", (0, 1)),
        lambda: empty.name("key"),
        lambda: empty.one_of("key", ("a", "b")),
    ):
        with pytest.raises(SimInputError, match=r"hall\.toml: key: "):
            reading()


def test_infinity_and_what_is_no_number_at_all_are_refused() -> None:
    for value in (math.inf, -math.inf, math.nan):
        with pytest.raises(SimInputError, match="key: a number from 0 to 1 is needed"):
            table(value).number("key", (0.0, 1.0))


def test_whole_numbers_are_told_as_people_write_them() -> None:
    with pytest.raises(SimInputError, match="from 1 to 2000 is needed"):
        table(0).integer("key", (1, 2000))
    with pytest.raises(SimInputError, match="from 0x10 to 0xefff is needed"):
        table(0).integer("key", (0x10, 0xEFFF))


@pytest.mark.parametrize("values", [3, [], "text", None])
def test_what_is_no_table_or_has_an_unknown_key_is_refused(values: object) -> None:
    with pytest.raises(SimInputError, match=r"here: fault: a table \[\[fault\]\] is needed"):
        Table(values, ("key",), "here", "[[fault]]")
    with pytest.raises(SimInputError, match="here: kye: no such key; known are key, other"):
        Table({"kye": 1}, ("key", "other"), "here", "[[fault]]")
