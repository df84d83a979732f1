"""The two sets of operations, for arrays and for plain numbers: one meaning."""

import math
from dataclasses import fields
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.mechanics.arrays import ARRAYS, PLAIN, Ops

numbers = st.floats(-50.0, 50.0)


def alone(name: str, *values: Any) -> Any:
    """The operation on plain numbers."""
    return getattr(PLAIN, name)(*values)


def among(name: str, *values: Any) -> Any:
    """The same on arrays of three, of which the middle one is asked for."""
    arrays = [np.array([1.0, value, 1.0]).astype(type(value)) for value in values]
    return getattr(ARRAYS, name)(*arrays)[1]


@pytest.mark.parametrize("name", ["sin", "cos", "exp", "expm1", "absolute", "sign", "floor"])
@given(value=numbers)
def test_of_one_number(name: str, value: float) -> None:
    assert alone(name, value) == pytest.approx(among(name, value), rel=1e-14, abs=1e-300)


@given(value=st.floats(0.0, 1e6))
def test_square_root(value: float) -> None:
    assert alone("sqrt", value) == among("sqrt", value)


@pytest.mark.parametrize("name", ["minimum", "maximum", "divide"])
@given(one=numbers, other=numbers)
def test_of_two_numbers(name: str, one: float, other: float) -> None:
    assert alone(name, one, other) == among(name, one, other)


@pytest.mark.parametrize("name", ["where", "choose"])
@pytest.mark.parametrize("mask", [True, False])
def test_choice(name: str, mask: bool) -> None:
    assert alone(name, mask, 3.0, 4.0) == among(name, mask, 3.0, 4.0) == (3.0 if mask else 4.0)


@pytest.mark.parametrize("ops", [ARRAYS, PLAIN])
def test_divided_by_nothing_is_nothing(ops: Ops) -> None:
    zero: Any = np.array([0.0]) if ops is ARRAYS else 0.0
    assert ops.divide(5.0, zero) == 0.0
    assert ops.divide(-5.0, zero) == 0.0


@pytest.mark.parametrize("mask", [True, False])
def test_masks(mask: bool) -> None:
    """A plain mask is its own some and every; its no is not a whole number's complement."""
    array = np.array([mask])
    assert bool(ARRAYS.no(array)[0]) is PLAIN.no(mask) is (not mask)  # type: ignore[arg-type, comparison-overlap]
    for name in ("some", "every"):
        assert getattr(ARRAYS, name)(array) is getattr(PLAIN, name)(mask) is mask
    assert ARRAYS.some(np.array([False, True])) is True
    assert ARRAYS.every(np.array([False, True])) is False


def test_pick_one_of_four() -> None:
    table = np.arange(8.0).reshape(2, 4)
    assert list(ARRAYS.pick(table, np.array([3, 0]))) == [3.0, 4.0]
    assert alone("pick", [5.0, 6.0, 7.0, 8.0], 2) == 7.0


def test_like() -> None:
    assert list(ARRAYS.like(np.zeros(3), 2.5)) == [2.5] * 3
    assert alone("like", 0.0, 2.5) == 2.5


@pytest.mark.parametrize("angle", [-math.pi / 2, -1e-12, 0.0, 1.0, 7.0])
def test_floor_goes_down_and_is_whole(angle: float) -> None:
    """Not towards zero: corners below the starting face are counted downwards."""
    found, many = alone("floor", angle / (math.pi / 2)), among("floor", angle / (math.pi / 2))
    assert isinstance(found, int)
    assert found == many == math.floor(angle / (math.pi / 2))
    assert many.dtype == np.int64


def test_both_offer_everything() -> None:
    for ops in (ARRAYS, PLAIN):
        assert all(callable(getattr(ops, field.name)) for field in fields(Ops))
