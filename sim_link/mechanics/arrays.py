"""Arrays of bodies, or one body alone: the operations that the mechanics is written in.

Owns what every room of this package needs of NumPy and no physics. The same lines compute a fleet,
with arrays of one element a body, and a single body, with plain numbers: NumPy takes some 1 us an
operation however short the array is, which made one motion cost 40 ms and not 4. Types speak of
arrays; a plain number stands for one of them. Everything is elementwise: what becomes of one
body never depends on which others are computed beside it.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Bools = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Ops:
    """The operations, for arrays or for plain numbers."""

    where: Callable[[Bools, Any, Any], Floats]
    choose: Callable[[Bools, Any, Any], Ints]
    """``where`` for whole numbers."""
    no: Callable[[Bools], Bools]
    some: Callable[[Any], bool]
    every: Callable[[Any], bool]
    pick: Callable[[Floats, Ints], Floats]
    """One of four, by number, from tables of four an element."""
    divide: Callable[[Any, Any], Floats]
    """Zero where the divisor is, and no error."""
    sin: Callable[[Floats], Floats]
    cos: Callable[[Floats], Floats]
    exp: Callable[[Any], Floats]
    expm1: Callable[[Floats], Floats]
    sqrt: Callable[[Floats], Floats]
    absolute: Callable[[Floats], Floats]
    minimum: Callable[[Any, Any], Floats]
    maximum: Callable[[Any, Any], Floats]
    sign: Callable[[Floats], Ints]
    floor: Callable[[Floats], Ints]
    like: Callable[[Floats, Any], Any]
    """An array of the first one's length, of one value throughout."""


def _pick(table: Floats, number: Ints) -> Floats:
    return table[np.arange(number.size), number]


def _divide(over: Any, under: Any) -> Floats:
    over, under = np.broadcast_arrays(over, under)
    divided: Floats = np.divide(over, under, out=np.zeros(over.shape), where=under != 0.0)
    return divided


ARRAYS: Final = Ops(
    where=np.where,
    choose=np.where,
    no=np.logical_not,
    some=lambda mask: bool(mask.any()),
    every=lambda mask: bool(mask.all()),
    pick=_pick,
    divide=_divide,
    sin=np.sin,
    cos=np.cos,
    exp=np.exp,
    expm1=np.expm1,
    sqrt=np.sqrt,
    absolute=np.abs,
    minimum=np.minimum,
    maximum=np.maximum,
    sign=lambda values: np.sign(values).astype(np.int64),
    floor=lambda values: np.floor(values).astype(np.int64),
    like=np.full_like,
)


def _chosen(mask: Any, this: Any, other: Any) -> Any:
    return this if mask else other


PLAIN: Final = Ops(
    where=_chosen,
    choose=_chosen,
    no=lambda mask: not mask,  # type: ignore[arg-type, return-value]
    some=bool,
    every=bool,
    pick=lambda table, number: table[number],
    divide=lambda over, under: over / under if under else under,
    sin=math.sin,  # type: ignore[arg-type]
    cos=math.cos,  # type: ignore[arg-type]
    exp=math.exp,  # type: ignore[arg-type]
    expm1=math.expm1,  # type: ignore[arg-type]
    sqrt=math.sqrt,  # type: ignore[arg-type]
    absolute=abs,
    minimum=lambda one, other: one if one < other else other,
    maximum=lambda one, other: one if one > other else other,
    sign=lambda value: (value > 0.0) - (value < 0.0),
    floor=math.floor,  # type: ignore[arg-type]
    like=lambda array, value: value,
)
