"""What modules keep and are asked for: their settings, and the traces of their last motions.

Owns what is known of both, what is still wanted, and when a trace is given up. Follows from the
records alone: questions are counted as they go out. When to ask is fetching.py's.
"""

from typing import Final

from console.fleet_modules import sender_of
from console.fleet_rows import setting_id_text, write_alarm, write_event, write_setting, write_trace
from console.fleet_state import FleetState, ModuleState, Moment, TraceState
from protocol.errors import RemoteProtocolError
from protocol.message import SettingValue, TraceAsk, TraceChunk

GIVE_UP_AFTER: Final = 10
"""Questions in a row that brought nothing of a trace."""

LOOKS: Final = 2
"""Readings of another value than was written, before it is told: one may have been on its way
since before the write."""

SettingWanted = tuple[int, int]
"""Module and setting."""
TraceWanted = tuple[int, int, int, int, int, int, int]
"""Module, epoch, boot, command number, identity, first chunk, mask of the chunks wanted."""


# -- settings ----------------------------------------------------------------------------


def take_setting_value(state: FleetState, at: Moment, address: int, message: SettingValue) -> None:
    """Take one setting as read."""
    module = sender_of(state, at, address, message.identity_bits, message.boot)
    if module is None:
        return
    settings = module.settings
    settings.total = message.settings
    there = message.lowest <= message.highest
    if _differs(settings.read.get(message.setting), message):
        settings.read[message.setting] = message
        settings.shown = tuple(
            (number, each.value)
            for number, each in sorted(settings.read.items())
            if each.lowest <= each.highest
        )
        if there:
            write_setting(at, module, message)
    _verify(state, at, module, message)


def _differs(last: SettingValue | None, message: SettingValue) -> bool:
    figures = (message.value, message.lowest, message.highest)
    return last is None or (last.value, last.lowest, last.highest) != figures


def _verify(state: FleetState, at: Moment, module: ModuleState, message: SettingValue) -> None:
    """Compare what is read with what was written, if anything was."""
    doubtful = module.settings.doubtful.pop(message.setting, None)
    if doubtful is None:
        return
    expected, looks = doubtful
    if expected in (None, message.value):
        return
    if looks + 1 < LOOKS:
        module.settings.doubtful[message.setting] = expected, looks + 1
        return
    name = setting_id_text(message.setting)
    text = f"{module.name}: {name} is {message.value}, and was set to {expected}"
    write_alarm(at, module, "setting differs", text)
    state.notice(at, text.replace("_", " "))


def settings_wanted(state: FleetState) -> tuple[SettingWanted, ...]:
    """The next setting to ask each module for: one in doubt, or the first that was not read."""
    wanted = ((module.module, _next_setting(module)) for module in state.modules.values())
    return tuple((module, setting) for module, setting in wanted if setting)


def _next_setting(module: ModuleState) -> int:
    settings = module.settings
    if settings.doubtful:
        return next(iter(settings.doubtful))
    every = range(1, max(settings.total, 1) + 1)
    return next((setting for setting in every if setting not in settings.read), 0)


# -- traces ------------------------------------------------------------------------------


def note_trace_ask(state: FleetState, at: Moment, address: int, message: TraceAsk) -> None:
    """Count a question about a trace."""
    module = state.by_sender.get((at.link, address, message.identity_bits))
    pending = None if module is None else _pending(module, message.boot, message.number)
    if pending is None:
        return
    pending.asked += 1
    if pending.asked == GIVE_UP_AFTER:
        write_event(at, pending.command, "trace", f"no chunk came to {GIVE_UP_AFTER} questions")


def take_trace_chunk(state: FleetState, at: Moment, address: int, message: TraceChunk) -> None:
    """Take one chunk of a trace that is wanted; write the trace once it is whole.

    Its boot is the command's, so it says nothing about the module's present one.
    """
    module = state.by_sender.get((at.link, address, message.identity_bits))
    pending = None if module is None else _pending(module, message.boot, message.number)
    if module is None or pending is None:
        return
    fetch = pending.fetch
    before = fetch.missing()
    try:
        fetch.take(message)
        if fetch.complete:
            write_trace(at, pending.command, fetch.trace())
            write_event(at, pending.command, "trace", f"{fetch.trace().head.samples} samples")
    except RemoteProtocolError as error:
        _tell_refused(at, pending, str(error))
    if fetch.absent:
        write_event(at, pending.command, "trace", "none was kept")
    if fetch.absent or fetch.complete:
        module.trace = None
    elif fetch.missing() != before:
        pending.asked = 0


def _pending(module: ModuleState, boot: int, number: int) -> TraceState | None:
    """The trace that is fetched from this module, if it is that of this command."""
    pending = module.trace
    if pending is None:
        return None
    planned = pending.command.planned
    return pending if (planned.boot, planned.number) == (boot, number) else None


def _tell_refused(at: Moment, pending: TraceState, why: str) -> None:
    """Note a chunk that does not fit the others; the first of a trace only."""
    if not pending.refused:
        pending.refused = True
        write_event(at, pending.command, "trace", why)


def traces_wanted(state: FleetState) -> tuple[TraceWanted, ...]:
    """The next question about each module's trace, where one is wanted."""
    asks = (_next_chunks(module) for module in state.modules.values() if module.trace)
    return tuple(ask for ask in asks if ask is not None)


def _next_chunks(module: ModuleState) -> TraceWanted | None:
    pending = module.trace
    if pending is None or pending.asked >= GIVE_UP_AFTER:
        return None
    first, mask = pending.fetch.missing()
    planned = pending.command.planned
    key = planned.module, planned.epoch, planned.boot, planned.number, planned.identity
    return (*key, first, mask) if mask else None
