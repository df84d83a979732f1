"""Roots within a step, found for all bodies at once.

Owns one bracketing method and no physics: a margin that is positive before an event and negative
after it, and the time between.
"""

import sys
from collections.abc import Callable
from typing import Final

from sim_link.mechanics.arrays import Floats, Ops

_ROUNDS: Final = 80
_AGREES: Final = 1e-12


def first_root(
    ops: Ops, margin: Callable[[Floats], Floats], late_s: Floats, early: Floats, late: Floats
) -> Floats:
    """Time within a step at which a margin runs out, one an element, seconds.

    ``margin`` is positive before and zero or less at ``late_s``; ``early`` and ``late`` are its
    values at zero and at ``late_s``. Chandrupatla's method (1997): inverse quadratic interpolation
    where the last three points make it safe, else halving. Returned is the late end of the last
    bracket, some 1e-12 of the step wide: there the event has happened.
    """
    one, other = late_s, ops.like(late_s, 0.0)
    at_one, at_other = late, ops.maximum(early, sys.float_info.min)
    narrow, part = _AGREES * late_s, ops.like(late_s, 0.5)
    for _ in range(_ROUNDS):
        open_ = ops.absolute(one - other) > 2.0 * narrow
        open_ = open_ & (at_one != 0.0) & (at_other != 0.0)
        if not ops.some(open_):
            break
        tried = ops.where(open_, one + part * (other - one), one)
        found = ops.where(open_, margin(tried), at_one)
        same = (found > 0.0) == (at_one > 0.0)
        third, at_third = ops.where(same, one, other), ops.where(same, at_one, at_other)
        across, at_across = ops.where(same, other, one), ops.where(same, at_other, at_one)
        other, at_other = ops.where(open_, across, other), ops.where(open_, at_across, at_other)
        one, at_one = tried, found
        part = _next_part(ops, (one, other, third), (at_one, at_other, at_third), narrow)
    return ops.where(at_one <= 0.0, one, other)


def _next_part(
    ops: Ops,
    points: tuple[Floats, Floats, Floats],
    values: tuple[Floats, Floats, Floats],
    narrow: Floats,
) -> Floats:
    """Where in the bracket from the first point to the second to try next; never nearer to an
    end than ``narrow``."""
    (x1, x2, x3), (f1, f2, f3) = points, values
    xi, phi = ops.divide(x1 - x2, x3 - x2), ops.divide(f1 - f2, f3 - f2)
    inside = (xi > 0.0) & (xi < 1.0)
    root, rest = ops.where(inside, xi, 0.25), ops.where(inside, 1.0 - xi, 0.75)
    safe = inside & (1.0 - ops.sqrt(rest) < phi) & (phi < ops.sqrt(root)) & (f3 != f1)
    across = ops.divide(f1, f1 - f2) * ops.divide(f3, f3 - f2)
    along = ops.divide(f1, f3 - f1) * ops.divide(f2, f2 - f3)
    guess = across - ops.divide(x3 - x1, x2 - x1) * along
    least = ops.minimum(ops.divide(narrow, ops.absolute(x2 - x1)), 0.5)
    part = ops.where(safe, guess, 0.5)
    return ops.minimum(ops.maximum(part, least), 1.0 - least)
