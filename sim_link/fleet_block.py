"""A [[block]] of a fleet file: many modules that differ by counting, in a few lines.

Owns what a block's keys mean and how its modules are told apart. Knows no files and no single
modules (fleet_file.py reads those).
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from protocol.codes import FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS, SIMULATED_BIT
from sim_link.fleet_spec import ModuleSpec
from sim_link.fleet_table import NAME, Table
from sim_link.kinds import Kind
from sim_link.options import MAX_MODULES

PLACE_M: Final = (-1000.0, 1000.0)
"""Bounds of a place in the hall, along both of its walls."""

BLOCK_KEYS: Final[Mapping[str, str]] = {
    "name": "their names, one to four # for a number counted from 1: `tray-##` is tray-01, tray-02",
    "count": "how many modules",
    "kind": "the kind of all of them",
    "address": "address of the first; the others follow",
    "identity": "identity of the first; the others follow",
    "face_up": "as in [[module]], or a list that they take in turn; 1 where left out",
    "charge": "as in [[module]], or [lowest, highest] between which they are spread",
    "groups": "as in [[module]], of all of them",
    "place_m": "place of the first; [0.0, 0.0] where left out",
    "columns": "how many stand in a row, along x; all in one row where left out",
    "spacing_m": "from one to the next, along x and y; 0.5 where left out",
}
"""Every key of a block, with its meaning."""

_NUMBERED: Final = re.compile(r"([^#]*)(#{1,4})([^#]*)")
_GOLDEN: Final = 0.6180339887498949
"""Multiples of it, without their whole part, spread evenly however many there are (Weyl)."""


@dataclass(frozen=True, slots=True)
class Fleetwide:
    """What all modules of a file share: kinds by name, names of groups, reports a second."""

    kinds: Mapping[str, Kind]
    groups: tuple[str, ...]
    telemetry_hz: float


def group_bits(table: Table, groups: tuple[str, ...]) -> int:
    """Read the key ``groups``; a group's number is its place among the file's groups."""
    return sum(1 << groups.index(name) for name in set(table.some_of("groups", groups)))


def block(values: object, wide: Fleetwide, where: str) -> tuple[ModuleSpec, ...]:
    """Read one block. Raises SimInputError naming ``where`` and the key."""
    table = Table(values, BLOCK_KEYS, where, "[[block]]")
    count = table.integer("count", (1, MAX_MODULES))
    names = _names(table, count)
    kind = wide.kinds[table.one_of("kind", wide.kinds)]
    last = LAST_MODULE_ADDRESS - count + 1
    address = table.integer("address", (FIRST_MODULE_ADDRESS, last))
    identity = table.integer("identity", (1, SIMULATED_BIT - count))
    faces = _faces(table)
    charges = _charges(table, count)
    groups = group_bits(table, wide.groups)
    places = _places(table, count)
    return tuple(
        ModuleSpec(
            name=names[index],
            kind=kind,
            address=address + index,
            identity=SIMULATED_BIT | (identity + index),
            telemetry_hz=wide.telemetry_hz,
            face_up=faces[index % len(faces)],
            charge=charges[index],
            place_m=places[index],
            groups=groups,
        )
        for index in range(count)
    )


def _names(table: Table, count: int) -> list[str]:
    written = table.get("name")
    found = _NUMBERED.fullmatch(written) if isinstance(written, str) else None
    if found is None:
        raise table.error("name", "a name with one to four # for its number is needed")
    before, signs, after = found.groups()
    names = [f"{before}{number:0{len(signs)}d}{after}" for number in range(1, count + 1)]
    if not NAME.fullmatch(names[-1]) or not NAME.fullmatch(names[0]):
        expected = "small letters, digits and hyphens are needed, at most 12 with the number"
        raise table.error("name", expected)
    if len(str(count)) > len(signs):
        raise table.error("name", f"{len(str(count))} # are needed to count to {count}")
    return names


def _faces(table: Table) -> list[int]:
    value = table.get("face_up")
    if not isinstance(value, list):
        return [table.integer("face_up", (1, 6), 1)]
    if not value or not all(type(face) is int and 1 <= face <= 6 for face in value):
        raise table.error("face_up", "whole numbers from 1 to 6 are needed")
    return value


def _charges(table: Table, count: int) -> list[float]:
    """Spread without any luck: a file describes one fleet, whatever the seed."""
    if not isinstance(table.get("charge"), list):
        return [table.number("charge", (0.0, 1.0), 0.95)] * count
    low, high = table.pair("charge", (0.0, 1.0), (0.95, 0.95))
    if low > high:
        raise table.error("charge", "the lowest comes first")
    return [round(low + (high - low) * (_GOLDEN * index % 1.0), 4) for index in range(count)]


def _places(table: Table, count: int) -> list[tuple[float, float]]:
    x_m, y_m = table.pair("place_m", PLACE_M, (0.0, 0.0))
    columns = table.integer("columns", (1, MAX_MODULES), count)
    spacing_m = table.number("spacing_m", (0.01, 100.0), 0.5)
    return [
        (round(x_m + spacing_m * (i % columns), 4), round(y_m + spacing_m * (i // columns), 4))
        for i in range(count)
    ]
