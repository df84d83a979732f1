"""Kinds: the physical parameters that several modules share, and what follows from them.

Owns the Kind, its reading from a table, and single-line derived quantities. Knows no motion
(mechanics.py) and no files (fleet_file.py reads those and passes the tables on).
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final, NamedTuple

from sim_link.errors import SimInputError


@dataclass(frozen=True, slots=True)
class Kind:
    """One kind of module: a cube with one flywheel. SI units, as each field's name says.

    ``body_inertia_kg_m2`` is that of the whole module, wheel locked, about its centre of mass
    (None: uniform cube). ``com_offset_m`` leads from the cube's centre to the centre of mass,
    (away from the hinge edge, up), for a pivot forward with face 1 up; it turns with the body.
    ``held``: magnets hold the hinge edge; otherwise the module stands on the floor by friction.
    ``brake_kept``: the part of the brake's torque that lasts while it holds; the rest goes with
    the time constant ``brake_decay_s``. ``cell_rc_resistance_ohm`` and ``cell_rc_s`` are the cell's
    slow part; None: what is usual for its resistance (cell.py).
    """

    name: str
    side_m: float
    mass_kg: float
    wheel_inertia_kg_m2: float
    body_inertia_kg_m2: float | None
    com_offset_m: tuple[float, float]
    wheel_max_rpm: float
    brake_torque_N_m: float
    brake_onset_s: float
    spin_up_torque_N_m: float
    magnet_torque_N_m: float
    magnet_angle_rad: float
    held: bool
    floor_friction: float
    face_friction: float
    restitution: float
    cell_capacity_mAh: float
    cell_resistance_ohm: float
    brake_kept: float = 1.0
    brake_decay_s: float = 0.05
    cell_rc_resistance_ohm: float | None = None
    cell_rc_s: float | None = None


def centre_inertia_kg_m2(kind: Kind) -> float:
    """Ic: whole module, wheel locked, about its centre of mass (uniform cube: m a^2 / 6)."""
    if kind.body_inertia_kg_m2 is None:
        return kind.mass_kg * kind.side_m**2 / 6.0
    return kind.body_inertia_kg_m2


def offset_m(kind: Kind, face_up: int = 1, sense: int = 1) -> tuple[float, float]:
    """Offset of the centre of mass, (away from the hinge edge, up), in another posture.

    Turning one face on in the ordered sense maps (away, up) to (-up, away); the other sense
    has its hinge edge on the other side. ``face_up`` is 1 to 4.
    """
    away, up = kind.com_offset_m
    for _ in range((face_up - 1) % 4):
        away, up = -up, away
    return away * sense, up


def hinge_radius_m(kind: Kind, face_up: int = 1, sense: int = 1) -> float:
    """r: from the hinge edge to the centre of mass (uniform cube: a / sqrt 2)."""
    away, up = offset_m(kind, face_up, sense)
    return math.hypot(kind.side_m / 2 + away, kind.side_m / 2 + up)


def rest_elevation_rad(kind: Kind, face_up: int = 1, sense: int = 1) -> float:
    """phi0: elevation of the centre of mass above the hinge edge at rest (uniform: pi / 4)."""
    away, up = offset_m(kind, face_up, sense)
    return math.atan2(kind.side_m / 2 + up, kind.side_m / 2 + away)


def edge_inertia_kg_m2(kind: Kind, face_up: int = 1, sense: int = 1) -> float:
    """Ie: whole module, wheel locked, about the hinge edge; parallel axes, Ic + m r^2."""
    r = hinge_radius_m(kind, face_up, sense)
    return centre_inertia_kg_m2(kind) + kind.mass_kg * r**2


def slipping_inertia_kg_m2(kind: Kind, face_up: int = 1, sense: int = 1) -> float:
    """Ib = Ie - Iw: what turns about the edge while the wheel still slips."""
    return edge_inertia_kg_m2(kind, face_up, sense) - kind.wheel_inertia_kg_m2


class _Range(NamedTuple):
    """Allowed values of one number: above ``low`` (or at it, where ``closed``), up to ``high``.

    ``default`` None: the key must be given. Only what is neutral when absent has a default; a
    brake or a wheel that nobody stated is never made up.
    """

    low: float
    closed: bool
    high: float
    default: float | None = None

    def holds(self, value: float) -> bool:
        return (value > self.low or (self.closed and value == self.low)) and value <= self.high

    def __str__(self) -> str:
        start = "at least" if self.closed else "above"
        return f"a number {start} {self.low:g} and at most {self.high:g}"


_NUMBERS: Final[dict[str, _Range]] = {
    "side_m": _Range(0.0, False, 2.0),
    "mass_kg": _Range(0.0, False, 1000.0),
    "wheel_inertia_kg_m2": _Range(0.0, False, 100.0),
    "wheel_max_rpm": _Range(0.0, False, 32767.0),
    "brake_torque_N_m": _Range(0.0, False, 1e5),
    "brake_onset_s": _Range(0.0, True, 1.0, 0.0),
    "spin_up_torque_N_m": _Range(0.0, False, 1e4),
    "magnet_torque_N_m": _Range(0.0, True, 1e4, 0.0),
    "magnet_angle_rad": _Range(0.0, False, 1.0, 0.05),
    "floor_friction": _Range(0.0, False, 2.0),
    "face_friction": _Range(0.0, True, 2.0, 0.0),
    "restitution": _Range(0.0, True, 0.9, 0.0),
    "cell_capacity_mAh": _Range(0.0, False, 1e6),
    "cell_resistance_ohm": _Range(0.0, True, 100.0),
    "brake_kept": _Range(0.0, False, 1.0, 1.0),
    "brake_decay_s": _Range(0.0, False, 10.0, 0.05),
}
_OPTIONAL: Final[dict[str, _Range]] = {
    "body_inertia_kg_m2": _Range(0.0, False, 1000.0),
    "cell_rc_resistance_ohm": _Range(0.0, True, 100.0),
    "cell_rc_s": _Range(0.0, False, 3600.0),
}
"""What follows from the rest where it is left out."""
_KEYS: Final = (*_NUMBERS, *_OPTIONAL, "com_offset_m", "held")


def kind_from_table(name: str, table: Mapping[str, object], where: str) -> Kind:
    """Read one kind from a table with the keys of Kind; ``where`` names its place in errors.

    Raises SimInputError for an unknown, missing or unusable key, and for values that no body
    can have together (a centre of mass outside the cube, a wheel heavier than the whole).
    """
    for key in table:
        if key not in _KEYS:
            raise SimInputError(where, key, f"no such key; known are {', '.join(sorted(_KEYS))}")
    numbers = {key: _number(table, key, allowed, where) for key, allowed in _NUMBERS.items()}
    held = table.get("held")
    if not isinstance(held, bool):
        raise SimInputError(where, "held", "true or false is needed")
    kind = Kind(
        name=name,
        body_inertia_kg_m2=_optional(table, "body_inertia_kg_m2", where),
        cell_rc_resistance_ohm=_optional(table, "cell_rc_resistance_ohm", where),
        cell_rc_s=_optional(table, "cell_rc_s", where),
        com_offset_m=_offset(table, numbers["side_m"] / 2, where),
        held=held,
        **numbers,
    )
    if kind.wheel_inertia_kg_m2 >= centre_inertia_kg_m2(kind):
        raise SimInputError(where, "wheel_inertia_kg_m2", "below the inertia of the whole module")
    return kind


def _is_number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _number(table: Mapping[str, object], key: str, allowed: _Range, where: str) -> float:
    value = table.get(key, allowed.default)
    if value is None:
        raise SimInputError(where, key, f"is missing; {allowed} is needed")
    if not isinstance(value, int | float) or isinstance(value, bool) or not allowed.holds(value):
        raise SimInputError(where, key, f"{allowed} is needed, not {value!r}")
    return float(value)


def _optional(table: Mapping[str, object], key: str, where: str) -> float | None:
    return _number(table, key, _OPTIONAL[key], where) if key in table else None


def _offset(table: Mapping[str, object], half_m: float, where: str) -> tuple[float, float]:
    value = table.get("com_offset_m", (0.0, 0.0))
    inside = _Range(-half_m, False, math.nextafter(half_m, 0.0))
    if isinstance(value, list | tuple) and len(value) == 2:
        away, up = value
        if _is_number(away) and _is_number(up) and inside.holds(away) and inside.holds(up):
            return float(away), float(up)
    raise SimInputError(
        where, "com_offset_m", f"two numbers between {-half_m:g} and {half_m:g} are needed"
    )
