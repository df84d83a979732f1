"""Roots within a step, many at once: against roots known by hand and another library's."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.mechanics.arrays import ARRAYS, PLAIN, Floats
from sim_link.mechanics.roots import first_root


def root_of(margin: "object", late: float) -> float:
    """The root of one plain function between zero and ``late``."""
    ask = margin
    assert callable(ask)
    return float(first_root(PLAIN, ask, late, ask(0.0), ask(late)))  # type: ignore[arg-type]


MARGINS = {
    "line": (lambda t: 1.0 - 3.0 * t, 1.0 / 3.0),
    "cosine": (math.cos, math.pi / 2),
    "exponential": (lambda t: math.exp(-t) - 0.5, math.log(2.0)),
    "flat root": (lambda t: (1.2 - t) ** 3, 1.2),
    "steep at the start": (lambda t: 0.001 - math.sqrt(t), 1e-6),
    "at the late end": (lambda t: 1.7 - t, 1.7),
    "jump": (lambda t: 1.0 if t < 0.7 else -1.0, 0.7),
}


@pytest.mark.parametrize("name", sorted(MARGINS))
def test_known_root(name: str) -> None:
    margin, root = MARGINS[name]
    late = 1.7
    found = root_of(margin, late)
    assert found == pytest.approx(root, rel=1e-9, abs=1e-11)
    assert margin(found) <= 0.0  # type: ignore[no-untyped-call]


@given(root=st.floats(0.01, 0.99), bend=st.floats(0.2, 5.0), late=st.floats(1e-6, 1e3))
def test_the_event_has_happened_at_what_is_returned(root: float, bend: float, late: float) -> None:
    """Roots anywhere in the step, of curves from a square root's to a fifth power's bend."""

    def margin(t: float) -> float:
        return float(root**bend - (t / late) ** bend)

    found = root_of(margin, late)
    assert margin(found) <= 0.0
    assert found == pytest.approx(root * late, rel=1e-9)


def test_as_another_library_finds_it() -> None:
    """scipy.optimize.brentq, on the time at which a thrown body falls below a tilting corner."""
    brentq = pytest.importorskip("scipy.optimize").brentq

    def margin(t: float) -> float:
        return 0.03 + 0.8 * t - 4.905 * t * t - 0.042 * math.cos(7.0 * t - 0.7)

    assert root_of(margin, 0.19) == pytest.approx(brentq(margin, 0.01, 0.19, xtol=1e-14), rel=1e-10)


def test_many_at_once_are_as_each_alone() -> None:
    roots = np.linspace(0.05, 0.95, 37)
    span = np.linspace(1.1, 1.9, 37) * roots

    def margin(t: Floats) -> Floats:
        return np.cos(t / roots * math.pi / 2)

    found = first_root(ARRAYS, margin, span, margin(0.0 * span), margin(span))
    assert found == pytest.approx(roots, rel=1e-10)
    for place in (0, 11, 36):
        only = slice(place, place + 1)

        def one(t: Floats, part: Floats = roots[only]) -> Floats:
            return np.cos(t / part * math.pi / 2)

        some = span[only]
        assert first_root(ARRAYS, one, some, one(0.0 * some), one(some))[0] == found[place]


def test_an_event_at_the_very_start() -> None:
    """A margin that has run out by then gives a time within 1e-11 of the step."""
    assert root_of(lambda t: -t, 1.0) < 1e-11
