"""The schedule of faults: what begins and ends when, and whom it is told to.

Owns the order of timed faults and their merging where they overlap. Knows nothing of what a fault
does: a module does that itself (mishaps.py), the bridge likewise. Nothing here is drawn: a
schedule is what was asked for, whatever the seed.
"""

from collections.abc import Callable, Iterable, Mapping
from functools import partial
from itertools import groupby
from types import MappingProxyType
from typing import Final, NamedTuple, Protocol

from sim_link.fault_kinds import BRIDGE, FAULT_RULES, Fault, FaultKind


class Step(NamedTuple):
    """One thing that happens: at a time of the fleet's life a fault begins, or ends."""

    t_ns: int
    begins: bool
    kind: FaultKind
    module: str


class Hall(Protocol):
    """What a schedule needs of the simulated world."""

    def at(self, t_ns: int, action: Callable[[], None]) -> None:
        """Call ``action`` once the fleet is so old."""

    def strike(self, module: str, kind: FaultKind, begins: bool) -> None:
        """Let a fault of a module begin or end now."""

    def reset_bridge(self) -> None:
        """Let the bridge start anew now."""

    def silence_bridge(self, silent: bool) -> None:
        """Let the bridge pass nothing on from now on, or everything again."""

    def unplug(self, unplugged: bool) -> None:
        """Pull the bridge's cable, or plug it in again."""


def steps(faults: Iterable[Fault]) -> tuple[Step, ...]:
    """Return what happens at a time, in the order of time; of one time, ends come first.

    Faults from the start on are in their modules already: of those there is the end only, if they
    have one. Faults of one kind and module that overlap are one.
    """
    found: list[Step] = []
    for (kind, module), group in groupby(sorted(faults, key=_whom), key=_whom):
        spans = [(fault.at_ns, fault.until_ns) for fault in group]
        for at_ns, until_ns in _merged(spans) if FAULT_RULES[kind].lasts else spans:
            if at_ns is not None:
                found.append(Step(at_ns, True, kind, module))
            if until_ns is not None:
                found.append(Step(until_ns, False, kind, module))
    return tuple(sorted(found))


def enter(faults: Iterable[Fault], hall: Hall) -> None:
    """Have everything that these faults ask for done in the hall at its time."""
    for step in steps(faults):
        hall.at(step.t_ns, partial(_do, step, hall))


_Span = tuple[int | None, int | None]


def _whom(fault: Fault) -> tuple[FaultKind, str]:
    return fault.kind, fault.module


def _merged(spans: Iterable[_Span]) -> list[_Span]:
    """Join spans that overlap or touch. A start of None is that of the fleet, an end of None is
    never."""
    joined: list[_Span] = []
    for at_ns, until_ns in sorted(spans, key=lambda span: -1 if span[0] is None else span[0]):
        if joined and _reaches(joined[-1][1], at_ns):
            joined[-1] = joined[-1][0], _later(joined[-1][1], until_ns)
        else:
            joined.append((at_ns, until_ns))
    return joined


def _reaches(end_ns: int | None, at_ns: int | None) -> bool:
    return end_ns is None or at_ns is None or end_ns >= at_ns


def _later(one_ns: int | None, other_ns: int | None) -> int | None:
    return None if one_ns is None or other_ns is None else max(one_ns, other_ns)


def _do(step: Step, hall: Hall) -> None:
    if step.module == BRIDGE:
        _TO_BRIDGE[step.kind](hall, step.begins)
    else:
        hall.strike(step.module, step.kind, step.begins)


def _reset_bridge(hall: Hall, begins: bool) -> None:
    hall.reset_bridge()


def _silence_bridge(hall: Hall, begins: bool) -> None:
    hall.silence_bridge(begins)


def _unplug(hall: Hall, begins: bool) -> None:
    hall.unplug(begins)


_TO_BRIDGE: Final[Mapping[FaultKind, Callable[[Hall, bool], None]]] = MappingProxyType(
    {
        FaultKind.RESTART: _reset_bridge,
        FaultKind.SILENT: _silence_bridge,
        FaultKind.UNPLUGGED: _unplug,
    }
)
"""Every kind that can strike the bridge."""
