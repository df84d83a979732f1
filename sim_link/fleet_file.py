"""Fleet files: which modules there are, of which kind, and how often they report.

Owns the reading of fleet files (TOML), where the shipped ones lie, and the keys of all tables but
two: those of a kind are read by kinds.py, those of a block by fleet_block.py. Knows nothing of
how a module behaves. The keys are told in fleets/FLEETS.md.
"""

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any, Final

from protocol.codes import FIRST_MODULE_ADDRESS, GROUPS, LAST_MODULE_ADDRESS, SIMULATED_BIT
from sim_link.errors import SimInputError
from sim_link.fault_kinds import BRIDGE, LATEST_S, Fault, FaultKind
from sim_link.fleet_block import BLOCK_KEYS, PLACE_M, Fleetwide, block, group_bits
from sim_link.fleet_spec import FleetSpec, ModuleSpec
from sim_link.fleet_table import NAME, NAME_EXPECTED, Table
from sim_link.kinds import Kind, kind_from_table
from sim_link.options import MAX_MODULES, SHIPPED

__all__ = [
    "FLEET_KEYS",
    "PRACTICE_FLEET",
    "SHIPPED",
    "FleetSpec",
    "ModuleSpec",
    "fleet_path",
    "load_fleet",
]

_FLEETS: Final = Path(__file__).parent / "fleets"
PRACTICE_FLEET: Final = _FLEETS / "practice.toml"

_TOP_KEYS: Final[Mapping[str, str]] = {
    "telemetry_hz": "reports a second of each module, until its setting says otherwise; 2.0",
    "groups": "names of groups; the first is group 0. At most 32",
    "kind": "tables [kind.NAME], see below; at least one",
    "module": "tables [[module]], one each",
    "block": "tables [[block]], many modules each",
    "fault": "tables [[fault]], one each",
}
_MODULE_KEYS: Final[Mapping[str, str]] = {
    "name": "at most 12 small letters, digits and hyphens; not `bridge`",
    "kind": "one of the file's kinds",
    "address": "0x10 to 0xefff, a different one for each",
    "identity": "a different one for each; the simulated mark is added",
    "face_up": "which face is up at the start: 1 to 4, or 5 or 6 with the wheel axis upright; 1",
    "charge": "of its cell at the start, 0 to 1; 0.95",
    "groups": "names of the groups that it is in, as delivered; none",
    "place_m": "where it stands, [x, y], each from -1000 to 1000; [0.0, 0.0]",
}
_FAULT_KEYS: Final[Mapping[str, str]] = {
    "kind": "one of the kinds of faults, see below",
    "module": "a module's name, or `bridge`",
    "at_s": "when, in seconds of the fleet's life; left out: from the start on",
    "for_s": "for how long; left out: it has no end",
}
FLEET_KEYS: Final[Mapping[str, Mapping[str, str]]] = {
    "top of the file": _TOP_KEYS,
    "[[module]]": _MODULE_KEYS,
    "[[block]]": BLOCK_KEYS,
    "[[fault]]": _FAULT_KEYS,
}
"""Every key of a fleet file with its meaning, by table; those of a kind are in kinds.py."""

_LINE: Final = re.compile(r"\(at (line \d+), column \d+\)|\(at (end of document)\)")
_NS_PER_S: Final = 1_000_000_000


def fleet_path(given: Path | None) -> Path:
    """Return the file that is meant: a path, or the bare name of a shipped fleet. A file of that
    name in the present folder comes first; None is the practice fleet."""
    if given is None:
        return PRACTICE_FLEET
    shipped = given.name in SHIPPED and given.parent == Path() and not given.exists()
    return _FLEETS / f"{given.name}.toml" if shipped else given


def load_fleet(path: Path | None) -> FleetSpec:
    """Read a fleet file, or a shipped fleet by its name; None reads the practice fleet.

    Raises SimInputError naming the file, the key (the line for a syntax error), and what was
    expected.
    """
    path = fleet_path(path)
    where = str(path)
    top = Table(_load_table(path), _TOP_KEYS, where, "top")
    telemetry_hz = top.number("telemetry_hz", (0.01, 100.0), 2.0)
    groups = top.names("groups", GROUPS)
    wide = Fleetwide(_kinds(top.get("kind"), where), groups, telemetry_hz)
    fleet = FleetSpec(wide.kinds, _modules(top, wide, where), telemetry_hz, groups)
    return replace(fleet, faults=_faults(top, fleet, where))


def load_kinds(path: Path) -> dict[str, Kind]:
    """Read the kinds of a file and nothing else of it; modules need not be there.

    Raises SimInputError as ``load_fleet`` does.
    """
    path = fleet_path(path)
    return _kinds(_load_table(path).get("kind"), str(path))


def _load_table(path: Path) -> dict[str, Any]:
    try:
        with path.open("rb") as file:
            return tomllib.load(file)
    except OSError as error:
        expected = f"cannot be read: {error.strerror}"
        if path.parent == Path() and not path.suffix:
            expected += f"; shipped fleets are {', '.join(SHIPPED)}"
        raise SimInputError(str(path), "file", expected) from error
    except UnicodeDecodeError as error:
        raise SimInputError(str(path), "file", "UTF-8 text is needed") from error
    except tomllib.TOMLDecodeError as error:
        text = str(error)
        found = _LINE.search(text)
        line = next(filter(None, found.groups())) if found else "syntax"
        said = _LINE.sub("", text).strip()
        raise SimInputError(str(path), line, f"TOML is needed: {said}") from error


def _kinds(tables: object, where: str) -> dict[str, Kind]:
    if not isinstance(tables, dict) or not tables:
        raise SimInputError(where, "kind", "at least one [kind.NAME] is needed")
    kinds = {}
    for name, table in tables.items():
        if not NAME.fullmatch(name):
            raise SimInputError(where, f"kind.{name}", NAME_EXPECTED)
        if not isinstance(table, dict):
            raise SimInputError(where, f"kind.{name}", f"a table [kind.{name}] is needed")
        kinds[name] = kind_from_table(name, table, f"{where}: kind.{name}")
    return kinds


def _modules(top: Table, wide: Fleetwide, where: str) -> tuple[ModuleSpec, ...]:
    specs = [
        _module(entry, wide, f"{where}: module {place}")
        for place, entry in enumerate(top.tables("module"), 1)
    ]
    for place, entry in enumerate(top.tables("block"), 1):
        specs += block(entry, wide, f"{where}: block {place}")
    if not specs:
        raise top.error("module", "at least one [[module]] is needed, or one [[block]]")
    if len(specs) > MAX_MODULES:
        raise top.error("block", f"at most {MAX_MODULES} modules in all, not {len(specs)}")
    for key in ("name", "address", "identity"):
        _require_distinct(specs, key, where)
    return tuple(specs)


def _module(entry: object, wide: Fleetwide, where: str) -> ModuleSpec:
    table = Table(entry, _MODULE_KEYS, where, "[[module]]")
    name = table.name("name")
    if name == BRIDGE:
        raise table.error("name", f"{BRIDGE!r} stands for the bridge, where faults are asked for")
    return ModuleSpec(
        name=name,
        kind=wide.kinds[table.one_of("kind", wide.kinds)],
        address=table.integer("address", (FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS)),
        identity=SIMULATED_BIT | table.integer("identity", (1, SIMULATED_BIT - 1)),
        telemetry_hz=wide.telemetry_hz,
        face_up=table.integer("face_up", (1, 6), 1),
        charge=table.number("charge", (0.0, 1.0), 0.95),
        place_m=table.pair("place_m", PLACE_M, (0.0, 0.0)),
        groups=group_bits(table, wide.groups),
    )


def _faults(top: Table, fleet: FleetSpec, where: str) -> tuple[Fault, ...]:
    return tuple(
        _fault(entry, fleet, f"{where}: fault {place}")
        for place, entry in enumerate(top.tables("fault"), 1)
    )


def _fault(entry: object, fleet: FleetSpec, where: str) -> Fault:
    table = Table(entry, _FAULT_KEYS, where, "[[fault]]")
    kind = FaultKind(table.one_of("kind", tuple(FaultKind)))
    module = table.get("module")
    if not isinstance(module, str):
        raise table.error("module", f"a module's name is needed, or {BRIDGE!r}")
    at_s = table.number("at_s", (0.0, LATEST_S)) if "at_s" in table else None
    for_s = table.number("for_s", (0.001, LATEST_S)) if "for_s" in table else None
    at_ns = None if at_s is None else round(at_s * _NS_PER_S)
    until_ns = None if for_s is None else (at_ns or 0) + round(for_s * _NS_PER_S)
    fault = Fault(kind, module, at_ns, until_ns)
    fleet.check(fault, where)
    return fault


def _require_distinct(specs: Sequence[ModuleSpec], key: str, where: str) -> None:
    """Two modules under one name, address or identity could not be told apart."""
    seen: dict[object, str] = {}
    for spec in specs:
        value = getattr(spec, key)
        if value in seen:
            both = f"{seen[value]} and {spec.name}"
            raise SimInputError(where, key, f"must differ, but is the same for {both}")
        seen[value] = spec.name
