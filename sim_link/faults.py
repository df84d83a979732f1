"""The faults of a module: which of them stand, since when, and what is said of each.

Owns the faults that stand. Knows no causes (mishaps.py makes them) and no effects: that a
standing fault drives no wheel is an interlock (refusals.py).
"""

from collections.abc import Iterator
from typing import NamedTuple

from protocol.codes import Fault
from protocol.message import FaultNotice


class _Noticed(NamedTuple):
    """When a fault was noticed, in module time, and its figure."""

    time_ms: int
    detail: int


class Faults:
    """What is wrong with one module. Iterates over the faults that stand, by number."""

    def __init__(self) -> None:
        self._standing: dict[Fault, _Noticed] = {}

    def __bool__(self) -> bool:
        return bool(self._standing)

    def __contains__(self, fault: Fault) -> bool:
        return fault in self._standing

    def __iter__(self) -> Iterator[Fault]:
        return iter(sorted(self._standing))

    def stand(self, fault: Fault, time_ms: int, detail: int = 0) -> None:
        """A fault is noticed, and stands from now on."""
        self._standing[fault] = _Noticed(time_ms, detail)

    def fall(self, fault: Fault) -> bool:
        """A fault is over; return whether it stood."""
        return self._standing.pop(fault, None) is not None

    def restart(self) -> None:
        """Start anew: what is broken still is, and is noticed as the start looks at it."""
        for fault, noticed in self._standing.items():
            self._standing[fault] = noticed._replace(time_ms=0)

    def told(self, fault: Fault, boot: int, bits: int) -> FaultNotice:
        """What is said of a fault that stands; ``bits``: those of the identity. Raises KeyError
        for one that does not stand."""
        noticed = self._standing[fault]
        return FaultNotice(boot, bits, fault, 1, noticed.time_ms, noticed.detail)
