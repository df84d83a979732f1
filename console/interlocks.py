"""Interlocks: the conditions that block an order for a module, each with its reason.

Owns one table. Each row says what it looks at, which motions it stands before, who enforces it
and whether a person may override it; in this version none can be. Knows modules and the fleet
only as views, and sends nothing.

The console looks first, so that a person reads the reason before anything is sent. What a module
enforces too, it enforces by what it measures at the start, which may differ from what was last
heard of it. ``rest`` and ``lock`` stand in no row: they are never blocked.
"""

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from console.limits import Limits
from console.orders import Order
from console.standing import follows, owned_by_another
from console.view import FleetView, LinkView, ModuleView
from protocol.codes import Activity, Flags, Setting

BATTERY_LOW_V: Final = 3.5
"""Cell voltage at rest below which no wheel is driven. Common practice of the trade for one
lithium-ion cell: about a tenth of the charge is left there, and the voltage falls steeply."""

TELEMETRY_OLD_NS: Final = 3_000_000_000
"""Six messages at 2 Hz: so many lost in a row means that the link or the module is gone."""

END_FACES: Final = frozenset({5, 6})
"""Faces on the ends of the wheel axis: with one of them up the axis is upright."""

NS_PER_S: Final = 1_000_000_000


class Enforcer(StrEnum):
    """Who holds an interlock: the console alone, the module alone, or both."""

    CONSOLE = "console"
    MODULE = "module"
    BOTH = "both"


@dataclass(frozen=True, slots=True)
class Block:
    """An interlock that stands in the way: its name, and its reason with the figures in it."""

    name: str
    text: str


@dataclass(frozen=True, slots=True)
class Case:
    """What an interlock looks at. ``log_trouble``: why the log does not write, or empty;
    ``alive``: whether the screen or the running sheet has given a sign of life just now."""

    module: ModuleView
    order: Order
    fleet: FleetView
    log_trouble: str
    limits: Limits
    alive: bool


@dataclass(frozen=True, slots=True)
class Interlock:
    """One row. ``reason`` returns the text on screen, or an empty one where nothing blocks."""

    name: str
    motions: frozenset[str]
    reason: Callable[[Case], str]
    enforced_by: Enforcer
    overridable: bool


def blocking(case: Case) -> list[Block]:
    """Return every interlock that blocks an order for a module, in the table's order."""
    motion = case.order.motion
    reasons = ((row.name, row.reason(case)) for row in INTERLOCKS if motion in row.motions)
    return [Block(name, text) for name, text in reasons if text]


def _link_closed(case: Case) -> str:
    link = _link(case)
    if link is None:
        return f"no link {case.module.link} is known"
    return "" if link.state == "open" else f"the link {link.url} is {link.state}, not open"


def _link(case: Case) -> LinkView | None:
    return next((link for link in case.fleet.links if link.link == case.module.link), None)


def _log_not_writing(case: Case) -> str:
    return f"the log does not write: {case.log_trouble}" if case.log_trouble else ""


def _all_stop(case: Case) -> str:
    if case.fleet.stop.in_force:
        return f"all-stop {case.fleet.stop.stop_number} is in force; it must be cleared first"
    if case.module.latched:
        return f"the module still holds all-stop {case.module.stop_number}; clear it first"
    return ""


def _owned(case: Case) -> str:
    if not owned_by_another(case.module, case.fleet):
        return ""
    until_ns = case.module.owner_heard_ns + case.module.owner_left_ms * 1_000_000
    left_s = (until_ns - case.fleet.t_ns) / NS_PER_S
    return f"another console owns it, for {left_s:.1f} s more at least; close that one first"


def _not_following(case: Case) -> str:
    if follows(case.module, case.fleet):
        return ""
    if case.module.epoch == 0:
        return "it has restarted and was not called since"
    return "it does not follow this console yet; the roll is being called"


def _locked_out(case: Case) -> str:
    person = case.module.locked_by
    if person is None:
        return ""
    return f"locked out by {person or 'somebody'}; only that person unlocks it"


def _fault_standing(case: Case) -> str:
    faults = ", ".join(each.replace("_", " ") for each in case.module.faults)
    return f"a fault stands: {faults}" if faults else ""


def _clock_unknown(case: Case) -> str:
    bound_ms, limit_ms = case.module.clock_bound_ms, case.limits.clock_bound_ns / 1e6
    if bound_ms is None:
        return "its clock is not known yet"
    if bound_ms <= limit_ms:
        return ""
    return f"its clock is known to {bound_ms:.0f} ms only; {limit_ms:.0f} ms are needed"


def _permit_refused(case: Case) -> str:
    if not case.alive:
        return "no drive permit is given: the screen or the sheet gives no sign of life"
    if case.module.permitted:
        return ""
    return "the module says that it holds no drive permit yet"


def _address_shared(case: Case) -> str:
    if not case.module.shares_address:
        return ""
    return f"another box answers at its address 0x{case.module.address:04x}; give one a new address"


def _telemetry_old(case: Case) -> str:
    if case.module.heard_t_ns is None:
        return "nothing was heard of it yet"
    age_ns = case.fleet.t_ns - case.module.heard_t_ns
    if age_ns <= TELEMETRY_OLD_NS:
        return ""
    # An age just over the limit must not be shown as the limit itself.
    age_s = max(age_ns, TELEMETRY_OLD_NS + NS_PER_S // 10) / NS_PER_S
    return f"last heard {age_s:.1f} s ago, more than {TELEMETRY_OLD_NS / NS_PER_S:g} s"


def _over_speed_limit(case: Case) -> str:
    asked_rpm, limit_rpm = case.order.speed_rpm, case.module.wheel_max_rpm
    if limit_rpm <= 0:
        return "its nameplate was not heard, so its speed limit is not known"
    if asked_rpm <= limit_rpm:
        return ""
    return f"{asked_rpm} rpm is over its limit of {limit_rpm} rpm"


def _battery_low(case: Case) -> str:
    battery_V = case.module.battery_V
    if battery_V == 0.0:
        return "its battery's voltage was not heard yet"
    if battery_V < BATTERY_LOW_V:
        return f"battery at {battery_V:.2f} V, below {BATTERY_LOW_V:.2f} V"
    if case.module.flags & Flags.BATTERY_LOW:
        return f"the module calls its battery low, at {battery_V:.2f} V"
    return ""


def _axis_wrong(case: Case) -> str:
    face_up, motion = case.module.face_up, case.order.motion
    upright = face_up in END_FACES
    flat = case.order.setting is Setting.FLAT
    if face_up == 0 or upright == (motion == "twist" or flat):
        return ""
    stands, needs = ("upright", "level") if upright else ("level", "upright")
    what = f"flat {motion}" if flat else motion
    return f"its wheel axis is {stands} (face {face_up} up); a {what} needs it {needs}"


def _not_settled(case: Case) -> str:
    module = case.module
    if module.activity != Activity.STILL:
        return f"not settled: it is {_doing(module.activity)} (wheel at {module.wheel_rpm} rpm)"
    if module.face_up == 0:
        return "not settled: it rests on no face"
    if module.flags & Flags.UNSETTLED:
        return f"not settled: its body still moves (face {module.face_up} up)"
    return ""


def _doing(activity: int) -> str:
    try:
        return Activity(activity).name.lower().replace("_", " ")
    except ValueError:
        return f"busy with something unknown (activity {activity})"


_BRAKED: Final = frozenset({"pivot", "hop", "twist"})
_WHEEL: Final = _BRAKED | {"spin"}
_SENT: Final = _WHEEL | {"flash", "unlock", "set"}

INTERLOCKS: Final = (
    Interlock("link not open", _SENT, _link_closed, Enforcer.CONSOLE, False),
    Interlock("log not writing", _SENT, _log_not_writing, Enforcer.CONSOLE, False),
    Interlock("all-stop in force", _WHEEL, _all_stop, Enforcer.BOTH, False),
    Interlock("locked out", _WHEEL, _locked_out, Enforcer.BOTH, False),
    Interlock("owned by another console", _SENT, _owned, Enforcer.BOTH, False),
    Interlock("restarted", _SENT, _not_following, Enforcer.BOTH, False),
    Interlock("address shared", _WHEEL, _address_shared, Enforcer.CONSOLE, False),
    Interlock("telemetry too old", _WHEEL, _telemetry_old, Enforcer.CONSOLE, False),
    Interlock("fault standing", _WHEEL, _fault_standing, Enforcer.BOTH, False),
    Interlock("clock unknown", _WHEEL, _clock_unknown, Enforcer.BOTH, False),
    Interlock("permit refused", _WHEEL, _permit_refused, Enforcer.BOTH, False),
    Interlock("over the speed limit", _WHEEL, _over_speed_limit, Enforcer.BOTH, False),
    Interlock("battery low", _WHEEL, _battery_low, Enforcer.BOTH, False),
    Interlock("wheel axis wrong", _BRAKED, _axis_wrong, Enforcer.BOTH, False),
    Interlock("not settled", _WHEEL, _not_settled, Enforcer.BOTH, False),
)
"""Every interlock, the ones that concern the whole fleet first. A flash turns no wheel and helps
to find a box after an all-stop, so it is blocked only where it could not be sent or recorded."""
