"""What a fleet is made of before it is switched on: modules, their kinds, groups and faults.

Owns the specification of one module and of a fleet, and how a fleet is cut, filled up and given
faults. Knows no files (fleet_file.py reads those) and nothing of how a module behaves.
"""

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Final

from protocol.codes import FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS, SIMULATED_BIT
from sim_link.deed import Deed
from sim_link.errors import SimInputError
from sim_link.fault_kinds import BRIDGE, Fault, FaultKind, check_fault
from sim_link.kinds import Kind

_MADE_UP_IDENTITY: Final = 0x0000_7E57_0000_0000
"""Identities of made-up modules start here, below the simulated mark."""
_MOST_NAMED: Final = 12


@dataclass(frozen=True, slots=True)
class ModuleSpec:
    """One module before it is switched on. ``identity`` carries the simulated mark.

    ``face_up`` 1 to 4, or 5 or 6 with the axis upright; ``charge`` 0 to 1; ``telemetry_hz``
    reports a second; ``faults``: those from the start on; ``place_m``: where it stands in the
    hall; ``groups``: bit n, it is in group n, as delivered; ``able``: what it is made for (None:
    all that its kind can).
    """

    name: str
    kind: Kind
    address: int
    identity: int
    telemetry_hz: float = 2.0
    face_up: int = 1
    charge: float = 0.95
    faults: frozenset[FaultKind] = frozenset()
    place_m: tuple[float, float] = (0.0, 0.0)
    groups: int = 0
    able: frozenset[Deed] | None = None


@dataclass(frozen=True, slots=True)
class FleetSpec:
    """A fleet: kinds by name, modules in order, groups in the order of their numbers.

    ``faults``: all that are asked for; those from the start on are in their modules once
    ``with_faults`` was called, and those with a time are schedule.py's.
    """

    kinds: Mapping[str, Kind]
    modules: tuple[ModuleSpec, ...]
    telemetry_hz: float
    groups: tuple[str, ...] = ()
    faults: tuple[Fault, ...] = ()

    def of_size(self, count: int | None) -> "FleetSpec":
        """Return the first ``count`` modules, made-up ones added where the file has fewer.

        Made-up modules take the kinds in turn and are named ``mod-009`` by their place, or by the
        next number that no module of the file has. Faults of modules that are left out are left
        out with them.
        """
        if count is None:
            return self
        used = {module.address for module in self.modules}
        free = (a for a in range(FIRST_MODULE_ADDRESS, LAST_MODULE_ADDRESS) if a not in used)
        taken = {module.name for module in self.modules}
        numbered = (f"mod-{number:03d}" for number in itertools.count(len(self.modules) + 1))
        names = (name for name in numbered if name not in taken)
        made_up = tuple(
            self._made_up(next(names), place, next(free))
            for place in range(len(self.modules), count)
        )
        modules = (self.modules + made_up)[:count]
        struck = {BRIDGE, *(module.name for module in modules)}
        kept = tuple(fault for fault in self.faults if fault.module in struck)
        return replace(self, modules=modules, faults=kept)

    def with_faults(self, faults: Sequence[Fault]) -> "FleetSpec":
        """Return the fleet with these faults besides its own, those from the start on in force.

        Raises SimInputError for an unknown module, and for a kind that cannot strike so.
        """
        for fault in faults:
            self.check(fault, "fault")
        asked = (*self.faults, *faults)
        at_start: dict[str, set[FaultKind]] = {}
        for fault in asked:
            if fault.at_ns is None:
                at_start.setdefault(fault.module, set()).add(fault.kind)
        modules = [
            replace(module, faults=frozenset(at_start.get(module.name, ())))
            for module in self.modules
        ]
        for place, module in enumerate(modules):
            if FaultKind.SAME_ADDRESS in module.faults:
                neighbour = modules[place - 1 if place else 1 % len(modules)]
                modules[place] = replace(module, address=neighbour.address)
        return replace(self, modules=tuple(modules), faults=asked)

    def check(self, fault: Fault, where: str) -> None:
        """Raise SimInputError, naming ``where``, for a fault that cannot be in this fleet."""
        names = {module.name for module in self.modules}
        if fault.module not in {BRIDGE, *names}:
            known = ", ".join(sorted(names)[:_MOST_NAMED])
            raise SimInputError(where, fault.module, f"no such module; known are {known}")
        check_fault(fault, where)

    def _made_up(self, name: str, place: int, address: int) -> ModuleSpec:
        kinds = list(self.kinds.values())
        return ModuleSpec(
            name=name,
            kind=kinds[place % len(kinds)],
            address=address,
            identity=SIMULATED_BIT | _MADE_UP_IDENTITY | address,
            telemetry_hz=self.telemetry_hz,
        )
