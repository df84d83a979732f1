"""Faults that can be asked for: their kinds, whom each can strike, and how one is written.

Owns the words of faults, in options and in fleet files alike, and which of them may have a time.
Knows nothing of what they do: mishaps.py makes them, schedule.py at their time.

Written ``KIND:MODULE`` (from the start on), ``KIND:MODULE@12.5s`` (from then on, or then) or
``KIND:MODULE@12.5s-20s`` (from then until then). Times are seconds of the fleet's life.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from types import MappingProxyType
from typing import Final

from sim_link.errors import SimInputError

BRIDGE: Final = "bridge"
"""What stands in place of a module's name for the bridge; so no module may be called that."""
FORMS: Final = "KIND:MODULE, KIND:MODULE@12.5s or KIND:MODULE@12.5s-20s"
LATEST_S: Final = 1_000_000
"""No fault has a later time; the fleet's clock on the wire goes on for longer."""


class FaultKind(StrEnum):
    """What can go wrong with a module or the bridge, or be done to it, for practice and tests.

    What each means stands in FAULT_RULES.
    """

    SILENT = "silent"
    WEAK_BRAKE = "weak_brake"
    LOW_BATTERY = "low_battery"
    RESTART_ON_BRAKE = "restart_on_brake"
    LOST_GYRO = "lost_gyro"
    STUCK_WHEEL = "stuck_wheel"
    BROWN_OUT = "brown_out"
    SAME_ADDRESS = "same_address"
    RESTART = "restart"
    UNPLUGGED = "unplugged"
    SWAPPED_CELL = "swapped_cell"
    CHARGING = "charging"
    LIFTED = "lifted"
    FADING_BRAKE = "fading_brake"
    WEAK_MAGNETS = "weak_magnets"
    DRAGGING_BEARING = "dragging_bearing"
    AGEING_CELL = "ageing_cell"


@dataclass(frozen=True, slots=True)
class FaultRule:
    """Whom a kind can strike and when. ``start``: from the start on, without a time; ``timed``:
    at a time; ``lasts``: until a time. ``says``: what it does, in a sentence for help."""

    says: str
    start: bool = True
    timed: bool = True
    lasts: bool = True
    module: bool = True
    bridge: bool = False


FAULT_RULES: Final[Mapping[FaultKind, FaultRule]] = MappingProxyType(
    {
        FaultKind.SILENT: FaultRule(
            "hears and obeys, but nothing that it sends gets out (without a time: after its first "
            "answer to a roll call); the bridge: passes nothing on, either way",
            bridge=True,
        ),
        FaultKind.WEAK_BRAKE: FaultRule(
            "its brake has a little over half of the torque that its kind states"
        ),
        FaultKind.LOW_BATTERY: FaultRule(
            "its cell is almost empty, and it refuses to drive; at the end it is as charged as at "
            "the start"
        ),
        FaultKind.RESTART_ON_BRAKE: FaultRule(
            "its watchdog restarts it the next time that its brake is applied, once"
        ),
        FaultKind.LOST_GYRO: FaultRule(
            "its gyroscope no longer answers after the next time that its brake is applied; at "
            "the end it answers again"
        ),
        FaultKind.STUCK_WHEEL: FaultRule(
            "its wheel is jammed (one that turns, once it is at rest), which is noticed as the "
            "motor tries; at the end it is free"
        ),
        FaultKind.BROWN_OUT: FaultRule(
            "its supply breaks down the next time that its wheel comes to speed, once"
        ),
        FaultKind.SAME_ADDRESS: FaultRule(
            "it answers at the address of its neighbour in the fleet file", timed=False, lasts=False
        ),
        FaultKind.RESTART: FaultRule(
            "it is switched off and on; the bridge: counts from the start again",
            start=False,
            lasts=False,
            bridge=True,
        ),
        FaultKind.UNPLUGGED: FaultRule(
            "the bridge's cable is pulled; at the end it is back",
            start=False,
            module=False,
            bridge=True,
        ),
        FaultKind.SWAPPED_CELL: FaultRule(
            "a person puts a fresh, full cell in, which restarts it", start=False, lasts=False
        ),
        FaultKind.CHARGING: FaultRule(
            "a person puts it on the charger, and takes it off at the end"
        ),
        FaultKind.LIFTED: FaultRule(
            "a person holds it in the hand; at the end it is set down on the next face forward",
            start=False,
        ),
        FaultKind.FADING_BRAKE: FaultRule(
            "its brake loses torque with use, and more while it is hot; at the end it has a new one"
        ),
        FaultKind.WEAK_MAGNETS: FaultRule(
            "its magnets weaken with use; at the end it has new ones"
        ),
        FaultKind.DRAGGING_BEARING: FaultRule(
            "its wheel's bearing drags more with use, and spinning up takes longer; at the end it "
            "has a new one"
        ),
        FaultKind.AGEING_CELL: FaultRule(
            "its cell's resistance rises and its capacity falls with use; at the end it is as new"
        ),
    }
)
"""Every kind, in the order in which help shows them."""

_SECONDS: Final = r"(\d{1,7}(?:\.\d{1,9})?)s"
_WRITTEN: Final = re.compile(rf"([a-z_]+):([^@:]+)(?:@{_SECONDS}(?:-{_SECONDS})?)?")
_NS_PER_S: Final = 1_000_000_000


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault of one module (by name) or of the bridge. ``at_ns`` None: from the start on;
    ``until_ns`` None: it has no end."""

    kind: FaultKind
    module: str
    at_ns: int | None = None
    until_ns: int | None = None

    def __str__(self) -> str:
        text = f"{self.kind}:{self.module}"
        if self.at_ns is not None:
            text += f"@{_seconds(self.at_ns)}"
        return text if self.until_ns is None else f"{text}-{_seconds(self.until_ns)}"


class FaultTextError(ValueError):
    """A text that is no fault; its own text says what was expected and what was there."""


def fault_from_text(text: str) -> Fault:
    """Read one fault. Raises FaultTextError for what is none: a form, a kind, an end not after its
    beginning, a time beyond LATEST_S."""
    found = _WRITTEN.fullmatch(text.strip())
    if found is None:
        raise FaultTextError(f"{FORMS} is needed, not {text!r}")
    kind, module, at, until = found.groups()
    if kind not in tuple(FaultKind):
        raise FaultTextError(f"KIND one of {', '.join(FaultKind)} is needed, not {kind!r}")
    fault = Fault(FaultKind(kind), module, _nanoseconds(at), _nanoseconds(until))
    if fault.until_ns is not None and fault.until_ns <= (fault.at_ns or 0):
        raise FaultTextError(f"an end after the beginning is needed, not {at}s-{until}s")
    return fault


def check_fault(fault: Fault, where: str) -> None:
    """Raise SimInputError, naming ``where``, for a kind that cannot strike this or then."""
    rule, kind = FAULT_RULES[fault.kind], str(fault.kind)
    if fault.module == BRIDGE and not rule.bridge:
        raise SimInputError(where, kind, "strikes modules, not the bridge")
    if fault.module != BRIDGE and not rule.module:
        raise SimInputError(where, kind, f"strikes the bridge only, as in {kind}:{BRIDGE}@12.5s")
    if fault.at_ns is None and not (rule.start and fault.module != BRIDGE):
        raise SimInputError(where, kind, f"needs a time, as in {kind}:{fault.module}@12.5s")
    if fault.at_ns is not None and not rule.timed:
        raise SimInputError(where, kind, "holds from the start on and takes no time")
    if fault.until_ns is not None and not rule.lasts:
        raise SimInputError(where, kind, "happens at one time and has no end")


def _nanoseconds(seconds: str | None) -> int | None:
    """Read seconds exactly: a float would not give back the text that it was read from."""
    if seconds is None:
        return None
    whole, _, part = seconds.partition(".")
    t_ns = int(whole) * _NS_PER_S + int(part.ljust(9, "0"))
    if t_ns > LATEST_S * _NS_PER_S:
        raise FaultTextError(f"at most {LATEST_S} s is needed, not {seconds}")
    return t_ns


def _seconds(t_ns: int) -> str:
    whole, part = divmod(t_ns, _NS_PER_S)
    return f"{whole}.{part:09d}".rstrip("0").rstrip(".") + "s"
