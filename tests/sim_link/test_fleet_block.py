"""Blocks: counting, spreading, standing in rows, and errors that name the key."""

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.codes import FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS, SIMULATED_BIT
from sim_link.errors import SimInputError
from sim_link.fleet_block import BLOCK_KEYS, Fleetwide, block
from sim_link.fleet_spec import ModuleSpec
from sim_link.options import MAX_MODULES
from tests.support.kinds import PLAIN

WIDE = Fleetwide({"plain": PLAIN}, ("north", "south", "odd"), 4.0)
LEAST = {"name": "tray-##", "count": 5, "kind": "plain", "address": 0x40, "identity": 0x900}


def made(**keys: Any) -> tuple[ModuleSpec, ...]:
    return block({**LEAST, **keys}, WIDE, "hall.toml: block 1")


def test_the_least_of_a_block() -> None:
    trays = made()
    assert [tray.name for tray in trays] == [f"tray-0{n}" for n in range(1, 6)]
    assert [tray.address for tray in trays] == [0x40, 0x41, 0x42, 0x43, 0x44]
    assert [tray.identity for tray in trays] == [SIMULATED_BIT | 0x900 + n for n in range(5)]
    assert {(t.kind, t.telemetry_hz, t.face_up, t.charge, t.groups) for t in trays} == {
        (PLAIN, 4.0, 1, 0.95, 0)
    }
    assert [tray.place_m for tray in trays] == [(0, 0), (0.5, 0), (1, 0), (1.5, 0), (2, 0)]


def test_everything_that_a_block_can_say() -> None:
    keys = {
        "name": "a#z",
        "face_up": [1, 5, 3],
        "charge": [0.5, 0.9],
        "groups": ["odd", "north"],
        "place_m": [-1.0, 7],
        "columns": 2,
        "spacing_m": 0.25,
    }
    assert {*LEAST, *keys} == set(BLOCK_KEYS)
    trays = made(**keys)
    assert [tray.name for tray in trays] == ["a1z", "a2z", "a3z", "a4z", "a5z"]
    assert [tray.face_up for tray in trays] == [1, 5, 3, 1, 5]
    assert {tray.groups for tray in trays} == {0b101}
    assert [tray.place_m for tray in trays] == [
        (-1.0, 7.0),
        (-0.75, 7.0),
        (-1.0, 7.25),
        (-0.75, 7.25),
        (-1.0, 7.5),
    ]
    # Weyl's sequence of the golden section, by hand: 0, 0.618, 0.236, 0.854, 0.472.
    assert [tray.charge for tray in trays] == [0.5, 0.7472, 0.5944, 0.8416, 0.6889]
    assert made(**keys) == trays


@given(st.integers(2, MAX_MODULES), st.floats(0, 0.5), st.floats(0.01, 0.5))
def test_charges_keep_their_bounds_and_fill_them(count: int, low: float, width: float) -> None:
    charges = [t.charge for t in made(name="n####", count=count, charge=[low, low + width])]
    assert low - 1e-4 <= min(charges) <= max(charges) <= low + width + 1e-4
    # By the three-distance theorem no gap of the spread is wider than 2.62 / count.
    gaps = [b - a for a, b in zip(sorted(charges), sorted(charges)[1:], strict=False)]
    assert max(gaps) <= 2.62 * width / count + 2e-4


@given(
    st.integers(1, MAX_MODULES), st.integers(FIRST_MODULE_ADDRESS, 0x8000), st.integers(1, 2**40)
)
def test_no_two_are_alike(count: int, address: int, identity: int) -> None:
    trays = made(name="n####", count=count, address=address, identity=identity)
    for key in ("name", "address", "identity", "place_m"):
        assert len({getattr(tray, key) for tray in trays}) == count


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        ({"colour": 1}, "colour: no such key; known are name, count"),
        ({"name": "tray"}, "name: a name with one to four # for its number is needed"),
        ({"name": "tray-#-#"}, "name: a name with one to four #"),
        ({"name": "tray-#####"}, "name: a name with one to four #"),
        ({"name": 7}, "name: a name with one to four #"),
        ({"name": "Tray-##"}, "name: small letters, digits and hyphens are needed"),
        ({"name": "##"}, "name: small letters, digits"),
        (
            {"name": "abcdefghijk-##"},
            "name: small letters, digits and hyphens are needed, at most 12",
        ),
        ({"name": "tray-#", "count": 10}, "name: 2 # are needed to count to 10"),
        ({"count": 0}, f"count: a whole number from 1 to {MAX_MODULES} is needed"),
        ({"count": MAX_MODULES + 1}, "count: a whole number"),
        ({"count": 2.0}, "count: a whole number"),
        ({"kind": "stone"}, "kind: one of plain is needed"),
        ({"kind": None}, "kind: one of plain is needed"),
        ({"address": 0xF}, "address: a whole number from 0x10 to 0xeffb is needed"),
        ({"address": LAST_MODULE_ADDRESS - 3}, "address: a whole number from 0x10"),
        ({"identity": 0}, "identity: a whole number from 0x1"),
        ({"identity": SIMULATED_BIT - 4}, "identity: a whole number"),
        ({"face_up": 7}, "face_up: a whole number from 1 to 6 is needed"),
        ({"face_up": []}, "face_up: whole numbers from 1 to 6 are needed"),
        ({"face_up": [1, 7]}, "face_up: whole numbers"),
        ({"face_up": [True]}, "face_up: whole numbers"),
        ({"charge": 1.5}, "charge: a number from 0 to 1 is needed"),
        ({"charge": [0.5]}, "charge: two numbers from 0 to 1 are needed"),
        ({"charge": [0.9, 0.5]}, "charge: the lowest comes first"),
        ({"groups": "north"}, "groups: a list of names out of north, south, odd is needed"),
        ({"groups": ["nroth"]}, "groups: a list of names out of north"),
        ({"place_m": [0]}, "place_m: two numbers from -1000 to 1000 are needed"),
        ({"place_m": [0, 1001.0]}, "place_m: two numbers"),
        ({"columns": 0}, "columns: a whole number from 1"),
        ({"spacing_m": 0}, "spacing_m: a number from 0.01 to 100 is needed"),
        ({"spacing_m": "wide"}, "spacing_m: a number"),
    ],
)
def test_a_bad_value_is_refused_with_its_key(keys: dict[str, Any], said: str) -> None:
    with pytest.raises(SimInputError) as caught:
        made(**keys)
    assert str(caught.value).startswith("hall.toml: block 1: " + said)


def test_a_block_that_is_no_table_is_refused() -> None:
    with pytest.raises(SimInputError, match=r"block 1: block: a table \[\[block\]\] is needed"):
        block(3, WIDE, "hall.toml: block 1")
