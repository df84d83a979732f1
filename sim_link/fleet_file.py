"""Fleet files: which modules there are, of which kind, and how often they report.

Owns the reading of fleet files (TOML) and the specification of one module. Knows nothing of
how a module behaves. The keys of a kind are read by kinds.py.
"""

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Final

from protocol.codes import FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS, SIMULATED_BIT
from sim_link.errors import SimInputError
from sim_link.kinds import Kind, kind_from_table
from sim_link.options import Fault, FaultKind

PRACTICE_FLEET: Final = Path(__file__).parent / "fleets" / "practice.toml"

_MADE_UP_IDENTITY: Final = 0x0000_7E57_0000_0000
"""Identities of made-up modules start here, below the simulated mark."""
_NAME: Final = re.compile(r"[a-z][a-z0-9-]{0,11}")
_LINE: Final = re.compile(r"\(at (line \d+), column \d+\)|\(at (end of document)\)")
_TOP_KEYS: Final = ("telemetry_hz", "kind", "module")


@dataclass(frozen=True, slots=True)
class ModuleSpec:
    """One module before it is switched on. ``identity`` carries the simulated mark.

    ``face_up`` 1 to 4, or 5 or 6 with the axis upright; ``charge`` 0 to 1; ``telemetry_hz``
    reports a second.
    """

    name: str
    kind: Kind
    address: int
    identity: int
    telemetry_hz: float = 2.0
    face_up: int = 1
    charge: float = 0.95
    faults: frozenset[FaultKind] = frozenset()


@dataclass(frozen=True, slots=True)
class FleetSpec:
    """A fleet as read from a file: kinds by name, modules in order."""

    kinds: Mapping[str, Kind]
    modules: tuple[ModuleSpec, ...]
    telemetry_hz: float

    def of_size(self, count: int | None) -> "FleetSpec":
        """Return the first ``count`` modules, made-up ones added where the file has fewer.

        Made-up modules take the kinds in turn and are named ``mod-009`` by their place.
        """
        if count is None:
            return self
        used = {module.address for module in self.modules}
        free = (a for a in range(FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS) if a not in used)
        made_up = tuple(
            self._made_up(place, next(free)) for place in range(len(self.modules), count)
        )
        return replace(self, modules=(self.modules + made_up)[:count])

    def with_faults(self, faults: Sequence[Fault]) -> "FleetSpec":
        """Return the fleet with these faults. Raises SimInputError for an unknown module."""
        names = {module.name for module in self.modules}
        for fault in faults:
            if fault.module not in names:
                known = ", ".join(sorted(names)[:12])
                raise SimInputError("fault", fault.module, f"no such module; known are {known}")
        modules = [
            replace(module, faults=frozenset(f.kind for f in faults if f.module == module.name))
            for module in self.modules
        ]
        for place, module in enumerate(modules):
            if FaultKind.SAME_ADDRESS in module.faults:
                neighbour = modules[place - 1 if place else 1 % len(modules)]
                modules[place] = replace(module, address=neighbour.address)
        return replace(self, modules=tuple(modules))

    def _made_up(self, place: int, address: int) -> ModuleSpec:
        kinds = list(self.kinds.values())
        return ModuleSpec(
            name=f"mod-{place + 1:03d}",
            kind=kinds[place % len(kinds)],
            address=address,
            identity=SIMULATED_BIT | _MADE_UP_IDENTITY | address,
            telemetry_hz=self.telemetry_hz,
        )


def load_fleet(path: Path | None) -> FleetSpec:
    """Read a fleet file; None reads the practice fleet.

    Raises SimInputError naming the file, the key (the line for a syntax error), and what was
    expected.
    """
    path = path or PRACTICE_FLEET
    table = _load_table(path)
    where = str(path)
    for key in table:
        if key not in _TOP_KEYS:
            raise SimInputError(where, key, f"no such key; known are {', '.join(_TOP_KEYS)}")
    telemetry_hz = _number(table, "telemetry_hz", (0.01, 100.0), where, 2.0)
    kinds = _kinds(table.get("kind"), where)
    modules = table.get("module")
    if not isinstance(modules, list) or not modules:
        raise SimInputError(where, "module", "at least one [[module]] is needed")
    specs = tuple(
        _module(entry, kinds, telemetry_hz, f"{where}: module {place}")
        for place, entry in enumerate(modules, 1)
    )
    for key in ("name", "address", "identity"):
        _require_distinct(specs, key, where)
    return FleetSpec(kinds, specs, telemetry_hz)


def _load_table(path: Path) -> dict[str, Any]:
    try:
        with path.open("rb") as file:
            return tomllib.load(file)
    except OSError as error:
        raise SimInputError(str(path), "file", f"cannot be read: {error.strerror}") from error
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
        if not _NAME.fullmatch(name):
            raise SimInputError(where, f"kind.{name}", _NAME_EXPECTED)
        if not isinstance(table, dict):
            raise SimInputError(where, f"kind.{name}", f"a table [kind.{name}] is needed")
        kinds[name] = kind_from_table(name, table, f"{where}: kind.{name}")
    return kinds


_NAME_EXPECTED: Final = "a name of at most 12 small letters, digits and hyphens is needed"
_MODULE_KEYS: Final = ("name", "kind", "address", "identity", "face_up", "charge")


def _module(entry: object, kinds: Mapping[str, Kind], hz: float, where: str) -> ModuleSpec:
    if not isinstance(entry, dict):
        raise SimInputError(where, "module", "a table [[module]] is needed")
    for key in entry:
        if key not in _MODULE_KEYS:
            raise SimInputError(where, key, f"no such key; known are {', '.join(_MODULE_KEYS)}")
    name = entry.get("name")
    if not isinstance(name, str) or not _NAME.fullmatch(name):
        raise SimInputError(where, "name", _NAME_EXPECTED)
    kind = entry.get("kind")
    if not isinstance(kind, str) or kind not in kinds:
        raise SimInputError(where, "kind", f"one of {', '.join(kinds)} is needed")
    last = LAST_MODULE_ADDRESS
    return ModuleSpec(
        name=name,
        kind=kinds[kind],
        address=_integer(entry, "address", (FIRST_MODULE_ADDRESS, last), where, None),
        identity=SIMULATED_BIT | _integer(entry, "identity", (1, SIMULATED_BIT - 1), where, None),
        telemetry_hz=hz,
        face_up=_integer(entry, "face_up", (1, 6), where, 1),
        charge=_number(entry, "charge", (0.0, 1.0), where, 0.95),
    )


def _integer(
    table: Mapping[str, Any], key: str, span: tuple[int, int], where: str, default: int | None
) -> int:
    value = table.get(key, default)
    if isinstance(value, bool) or not isinstance(value, int) or not span[0] <= value <= span[1]:
        expected = f"a whole number from {span[0]:#x} to {span[1]:#x} is needed"
        raise SimInputError(where, key, expected)
    return value


def _number(
    table: Mapping[str, Any], key: str, span: tuple[float, float], where: str, default: float
) -> float:
    value = table.get(key, default)
    if (
        isinstance(value, bool)
        or not isinstance(value, int | float)
        or not span[0] <= value <= span[1]
    ):
        raise SimInputError(where, key, f"a number from {span[0]:g} to {span[1]:g} is needed")
    return float(value)


def _require_distinct(specs: Sequence[ModuleSpec], key: str, where: str) -> None:
    """Two modules under one name, address or identity could not be told apart."""
    seen: dict[object, str] = {}
    for spec in specs:
        value = getattr(spec, key)
        if value in seen:
            both = f"{seen[value]} and {spec.name}"
            raise SimInputError(where, key, f"must differ, but is the same for {both}")
        seen[value] = spec.name
