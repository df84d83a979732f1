"""The reducer: one deterministic function from a stream of records to the fleet and its rows.

Owns the table from record type to rule, and is the only door to the fleet's state. Live, replay
and rebuild all fold with it and so come to the same end (law 7). Must not know clocks, I/O,
screens or SQL. The rules are in the fleet_* modules:

    fleet_state       what is remembered        fleet_parts     parts of it with own rules
    fleet_links       bytes to messages         fleet_modules   who is there, telemetry
    fleet_commands    a command's life          fleet_endings   a command's one ending
    fleet_stop        the all-stop              fleet_clock     modules' clocks
    fleet_conditions  lock-outs and faults      fleet_reports   who tells of them; bridges
    fleet_kept        settings and traces       fleet_rows      rows for the log
    fleet_views       pictures for screens
"""

from collections.abc import Callable
from typing import Any, Final

from console.errors import LogError
from console.fleet_clock import known_clock
from console.fleet_commands import expire, plan_order, start_stage, void_order
from console.fleet_endings import close_commands
from console.fleet_kept import SettingWanted, TraceWanted, settings_wanted, traces_wanted
from console.fleet_links import (
    change_link,
    refuse_frames,
    share_out,
    take_bytes_in,
    take_bytes_out,
)
from console.fleet_rows import write_correction, write_remark, write_sheet
from console.fleet_state import FleetState, Moment, Step
from console.fleet_stop import lift_stop, press_stop, stop_view
from console.fleet_views import bridge_view, command_view, link_view, module_view, module_views
from console.view import CommandView, FleetView, ModuleView
from protocol.clock import ModuleClock
from storage.records import (
    BytesIn,
    BytesOut,
    CommandExpired,
    Correction,
    EpochChosen,
    FramesRefused,
    LinkChanged,
    OrderGiven,
    OrderVoided,
    Record,
    Remark,
    SessionClosed,
    SessionOpened,
    SheetClosed,
    SheetOpened,
    SlotsPlanned,
    StageStarted,
    StopLifted,
    StopPressed,
)

__all__ = ["FleetReducer", "Step"]


def _open_session(state: FleetState, at: Moment, record: SessionOpened) -> None:
    state.opened_utc = record.utc
    state.operator = record.operator
    state.epoch = record.epoch
    state.console = record.console
    state.sealed = record.sealed


def _close_session(state: FleetState, at: Moment, record: SessionClosed) -> None:
    for module in state.modules.values():
        close_commands(state, at, module, "session closed")
    state.closed = True


def _choose_epoch(state: FleetState, at: Moment, record: EpochChosen) -> None:
    state.epoch = record.epoch


def _open_sheet(state: FleetState, at: Moment, record: SheetOpened) -> None:
    state.sheets[record.sheet] = record
    write_sheet(at, record, None, None)


def _close_sheet(state: FleetState, at: Moment, record: SheetClosed) -> None:
    opened = state.sheets.get(record.sheet)
    if opened is None:
        raise LogError(
            f"record {at.number} closes sheet {record.sheet}, of whose opening no record tells; "
            "the session's records are not whole"
        )
    write_sheet(at, opened, at.t_ns, record.stopped)


def _remark(state: FleetState, at: Moment, record: Remark) -> None:
    write_remark(at, record)


def _correct(state: FleetState, at: Moment, record: Correction) -> None:
    write_correction(at, record)


RULES: Final[dict[type[Any], Callable[[FleetState, Moment, Any], None]]] = {
    BytesIn: take_bytes_in,
    BytesOut: take_bytes_out,
    SessionOpened: _open_session,
    SessionClosed: _close_session,
    LinkChanged: change_link,
    FramesRefused: refuse_frames,
    EpochChosen: _choose_epoch,
    OrderGiven: plan_order,
    OrderVoided: void_order,
    CommandExpired: expire,
    StageStarted: start_stage,
    SlotsPlanned: share_out,
    StopPressed: press_stop,
    StopLifted: lift_stop,
    SheetOpened: _open_sheet,
    SheetClosed: _close_sheet,
    Remark: _remark,
    Correction: _correct,
}


class FleetReducer:
    """Folds records, in order, into the fleet. Not for several threads: its pictures are."""

    def __init__(self) -> None:
        self._state = FleetState()
        self._modules: tuple[ModuleView, ...] = ()

    def apply(self, number: int, record: Record) -> Step:
        """Fold one record; ``number`` is its count in the session, rising from call to call.

        Raises LogError where it speaks of something that no earlier record tells of.
        """
        step = Step()
        RULES[type(record)](self._state, Moment(number, record.t_ns, step), record)
        return step

    def view(self, t_ns: int) -> FleetView:
        """A picture of the fleet at ``t_ns``; only parts that changed are made anew."""
        state = self._state
        modules = self.modules()
        return FleetView(
            t_ns=t_ns,
            opened_utc=state.opened_utc,
            operator=state.operator,
            epoch=state.epoch,
            simulated=any(module.simulated for module in modules),
            modules=modules,
            links=tuple(map(link_view, state.links.values())),
            stop=stop_view(state),
            notices=tuple(state.notices),
            closed=state.closed,
            sealed=state.sealed,
            console=state.console,
            bridges=tuple(bridge_view(*each) for each in state.bridges.items()),
        )

    def modules(self) -> tuple[ModuleView, ...]:
        """All modules, in the order in which they were first heard."""
        if self._state.changed:
            self._modules = module_views(self._state)
            self._state.changed = False
        return self._modules

    def module(self, module: int) -> ModuleView | None:
        """The module of this count (from 1), or None."""
        state = self._state.modules.get(module)
        return None if state is None else module_view(state)

    def find(self, name: str) -> ModuleView | None:
        """The module of this name, or None. Names are unique within a session."""
        return self.modules_by_name().get(name)

    def modules_by_name(self) -> dict[str, ModuleView]:
        """All modules by name, in the order in which they were first heard."""
        return {module.name: module for module in self.modules()}

    def command(self, command: int) -> CommandView | None:
        """The command of this count, or None."""
        state = self._state.commands.get(command)
        return None if state is None else command_view(state)

    def open_commands(self) -> list[int]:
        """Commands that have no ending yet, module by module, each in order of giving."""
        return [each for module in self._state.modules.values() for each in module.in_hand]

    @property
    def epoch(self) -> int:
        """The console's epoch, as opened or chosen since."""
        return self._state.epoch

    @property
    def highest_epoch(self) -> int:
        """The highest epoch that was found in the way, 0 where none was: greater than this
        console's at that time, or the same under another console's number. If it is not below
        ``epoch``, one more than it is to be chosen."""
        return self._state.highest_epoch

    @property
    def console(self) -> int:
        """This console's number, as drawn at the session's opening; 0 in older logs."""
        return self._state.console

    def clock(self, module: int) -> ModuleClock | None:
        """The clock of the module of this count over its present link; None before its first
        exchange. Its times are those of the records. To be read, not changed."""
        state = self._state.modules.get(module)
        return None if state is None else known_clock(state)

    def report_ms(self, module: int) -> int | None:
        """Module time of the newest telemetry that the module of this count sent in this boot;
        None before the first."""
        state = self._state.modules.get(module)
        return None if state is None else state.report_ms

    def settings_wanted(self) -> tuple[SettingWanted, ...]:
        """Module and setting to ask for next, one a module: of a setting just written, whether it
        holds; else the first that was not read. Empty once all is known."""
        return settings_wanted(self._state)

    def trace_wanted(self) -> tuple[TraceWanted, ...]:
        """Module, epoch, boot, number, identity, first chunk and mask to ask for next, for each
        module whose last motion's trace is neither whole, nor absent, nor given up."""
        return traces_wanted(self._state)

    @property
    def newest_stop(self) -> int:
        """The highest stop number known, pressed here or reported by a module; 0: none."""
        return self._state.stop.newest

    @property
    def unknown_heard(self) -> bool:
        """Whether somebody was heard since the last Presence whom, or whose boot or latch, no
        Presence explains: a reason to call the roll."""
        return self._state.unknown_heard
