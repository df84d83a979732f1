"""Conditions that stand until somebody ends them: lock-outs and faults.

Owns when one begins and ends, and that a person reads of it once. Two sources tell: messages of
their own, which say who or what, and the flags of each telemetry, which only say that. A flag that
nothing explains is a reason to call the roll, since the answers to it explain.

Must not know who is who (fleet_modules.py): the module is an argument here.
"""

from typing import Final

from console.fleet_rows import FAULT_DETAILS, fault_text, write_alarm, write_module
from console.fleet_state import (
    FAULTY,
    LATCHED,
    LOCKED_OUT,
    FleetState,
    ModuleState,
    Moment,
)
from console.fleet_stop import hear_latch
from protocol.message import FaultNotice

_HALF: Final = 1 << 31
_WHOLE: Final = 1 << 32


def hear_flags(state: FleetState, at: Moment, module: ModuleState, flags: int) -> None:
    """Take a telemetry's flags that say something else than was known."""
    latched = bool(flags & LATCHED)
    if latched is not module.latched:
        hear_latch(state, at, module, None, latched)
    begun = flags & ~module.conditions & (LOCKED_OUT | FAULTY)
    state.unknown_heard |= bool(begun)
    hear_conditions(state, at, module, flags)


def hear_conditions(state: FleetState, at: Moment, module: ModuleState, flags: int) -> None:
    """Take whether a module is locked out and whether a fault stands, where only flags say it."""
    locked = bool(flags & LOCKED_OUT)
    if locked is (module.locked_out_by is None):
        hear_lock(state, at, module, locked, "")
    module.set_condition(FAULTY, bool(flags & FAULTY))
    if not flags & FAULTY:
        for fault in sorted(module.faults.standing):
            _end_fault(state, at, module, fault)


# -- lock-out ----------------------------------------------------------------------------


def hear_lock(
    state: FleetState, at: Moment, module: ModuleState, locked: bool, person: str
) -> None:
    """A module is locked out by this person (empty: not known by whom), or no longer."""
    now = person if locked else None
    if now == module.locked_out_by:
        return
    module.set_condition(LOCKED_OUT, locked)
    module.locked_by = person if locked else ""
    state.touch(module)
    by = f" by {person}" if person and locked else ""
    text = f"{module.name} is {'locked out' if locked else 'not locked out any more'}{by}"
    write_alarm(at, module, "locked out" if locked else "unlocked", text)
    state.notice(at, text)
    write_module(at, module)


# -- faults ------------------------------------------------------------------------------


def hear_fault(state: FleetState, at: Moment, module: ModuleState, notice: FaultNotice) -> None:
    """Take a fault's beginning or end. What was said before is passed over: a notice is repeated
    in answer to each roll call, and may come late."""
    faults = module.faults
    told = faults.told.get(notice.fault)
    if told is not None and 0 < (told[0] - notice.time_ms) % _WHOLE < _HALF:
        return
    if notice.standing:
        faults.told[notice.fault] = notice.time_ms, notice.standing
        _begin_fault(state, at, module, notice)
    elif notice.fault in faults.standing:
        faults.told[notice.fault] = notice.time_ms, notice.standing
        _end_fault(state, at, module, notice.fault)
    else:
        hear_moment(state, at, module, notice)


def hear_moment(state: FleetState, at: Moment, module: ModuleState, notice: FaultNotice) -> None:
    """Take a fault that did not stand, or whose beginning was not heard; once."""
    word = notice.time_ms, notice.standing
    if module.faults.told.get(notice.fault) != word:
        module.faults.told[notice.fault] = word
        _tell(state, at, module, f"{fault_text(notice.fault)}{_figure(notice)}, a moment")


def _begin_fault(state: FleetState, at: Moment, module: ModuleState, notice: FaultNotice) -> None:
    if notice.fault in module.faults.standing:
        return
    module.faults.standing.add(notice.fault)
    _show(state, module)
    _tell(state, at, module, f"{fault_text(notice.fault)}{_figure(notice)}")


def _end_fault(state: FleetState, at: Moment, module: ModuleState, fault: int) -> None:
    module.faults.standing.discard(fault)
    _show(state, module)
    _tell(state, at, module, f"{fault_text(fault)} is over")


def _show(state: FleetState, module: ModuleState) -> None:
    faults = module.faults
    faults.shown = tuple(fault_text(each) for each in sorted(faults.standing))
    module.set_condition(FAULTY, bool(faults.standing))
    state.touch(module)


def _tell(state: FleetState, at: Moment, module: ModuleState, text: str) -> None:
    write_alarm(at, module, "fault", text)
    state.notice(at, f"{module.name}: {text.replace('_', ' ')}")


def _figure(notice: FaultNotice) -> str:
    """The figure that belongs to a fault, with its unit."""
    known = FAULT_DETAILS.get(notice.fault)
    if known is None:
        return ""
    scale, unit = known
    return f", {notice.detail / scale:g} {unit}"


def forget_faults(module: ModuleState) -> None:
    """A restart: what stood before is told anew, if it still does."""
    module.faults.told.clear()
    module.faults.standing.clear()
    module.faults.shown = ()
    module.set_condition(FAULTY, stands=False)
