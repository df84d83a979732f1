"""The one ending of a command: how it is entered, what outcome it gives a motion, who is told.

Owns the order in which an ending's traces are left, so that each way to an end leaves the same.
Must not know which message or timer led to it: fleet_commands decides that.
"""

from collections.abc import Callable
from typing import Final

from console.fleet_rows import (
    DIRECTION_NAMES,
    SETTING_NAMES,
    reason_text,
    setting_id_text,
    write_command,
    write_event,
    write_motion,
)
from console.fleet_state import (
    MOTIONS,
    OPEN_ENDED,
    CommandState,
    FleetState,
    ModuleState,
    Moment,
    TraceState,
)
from console.verdict import verdict
from console.view import Outcome
from protocol.codes import Reason
from storage.records import PlannedCommand

_OUTCOMES_WITHOUT_FACTS: Final = {
    "refused": Outcome.REFUSED,
    "cut": Outcome.CUT,
    "unseen": Outcome.UNSEEN,
    "finished": Outcome.UNSEEN,
}
"""Outcome of a motion whose facts did not come; without them even a finished one is unseen."""

_TOLD: Final = {"refused": "refused", "unseen": "gave no report of", "cut": "cut short"}
"""Endings that a person is told of, in the words of the notice."""

_ASKED_FOR: Final = frozenset(
    reason_text(each) for each in (Reason.STOPPED, Reason.RESTED, Reason.LOCKED_OUT)
)
"""Reasons of a cut that a person gave; of those nobody needs to be told."""


def in_words(planned: PlannedCommand) -> str:
    """A command in words, as an order would put it without its subject."""
    special = _WORDS.get(planned.motion)
    if special is not None:
        return special(planned)
    words = [
        planned.motion,
        SETTING_NAMES.get(planned.setting, ""),
        DIRECTION_NAMES.get(planned.direction, ""),
        f"at {planned.speed_rpm} rpm" if planned.speed_rpm else "",
        "together" if planned.stage else "",
    ]
    return " ".join(word for word in words if word)


def _set_in_words(planned: PlannedCommand) -> str:
    *words, last = setting_id_text(planned.setting).split("_")
    unit = _UNITS.get(last, "")
    words += [] if unit else [last]
    return f"set {' '.join(words)} to {planned.value} {unit}".rstrip()


_UNITS: Final = {"rpm": "rpm", "ms": "ms", "mv": "mV"}
"""A unit as it ends a setting's name in lower case, and as a person reads it."""

_WORDS: Final[dict[str, Callable[[PlannedCommand], str]]] = {
    "lock": lambda planned: f"lock-out by {planned.person}",
    "unlock": lambda planned: f"unlock by {planned.person}",
    "set": _set_in_words,
}
"""Motions whose words are not those of a wheel's motion."""


def end_command(
    state: FleetState,
    at: Moment,
    command: CommandState,
    ending: str,
    reason: str | None,
    *,
    final: bool = True,
) -> None:
    """Give a command its ending, or resolve one that was open-ended."""
    first = command.ending is None
    command.ending, command.reason, command.final = ending, reason, final
    command.ended_t_ns = at.t_ns
    _keep_in_right_place(command)
    _judge_motion(command, first)
    _ask_after(command)
    state.touch(command.module)
    write_command(at, command)
    write_event(at, command, ending, reason or "")
    write_motion(at, command)
    if first:
        at.step.ended.append(command.planned.command)
    _tell(state, at, command)


def _keep_in_right_place(command: CommandState) -> None:
    module, number = command.module, command.planned.command
    module.in_hand.pop(number, None)
    if command.final:
        module.unsure.pop(number, None)
    else:
        module.unsure[number] = command


def _judge_motion(command: CommandState, first: bool) -> None:
    if command.planned.motion not in MOTIONS:
        return
    if first:
        command.module.ribbon.append(command)
    if command.facts is not None:
        command.outcome = verdict(command.facts, command.planned.motion, command.planned.setting)
    else:
        command.outcome = _OUTCOMES_WITHOUT_FACTS[command.ending or OPEN_ENDED]


def _ask_after(command: CommandState) -> None:
    """Note what a module is to be asked for now: the trace of a motion whose facts came, and a
    setting that was written, or may have been. A module keeps the trace of its last motion."""
    module, planned = command.module, command.planned
    if command.facts is not None:
        last = module.trace
        if last is None or last.command.planned.command < planned.command:
            module.trace = TraceState(command)
    elif planned.motion == "set" and command.ending != "refused":
        expected = planned.value if command.ending == "finished" else None
        module.settings.doubtful[planned.setting] = expected, 0


def _tell(state: FleetState, at: Moment, command: CommandState) -> None:
    told = _TOLD.get(command.ending or "")
    if told and not (command.ending == "cut" and command.reason in _ASKED_FOR):
        why = f": {command.reason.replace('_', ' ')}" if command.reason else ""
        state.notice(at, f"{command.module.name} {told} {in_words(command.planned)}{why}")


def close_commands(state: FleetState, at: Moment, module: ModuleState, why: str) -> None:
    """No report can come any more: end what is in hand as unseen, and make unseen final."""
    for command in list(module.in_hand.values()):
        end_command(state, at, command, OPEN_ENDED, why)
    for command in list(module.unsure.values()):
        del module.unsure[command.planned.command]
        command.final = True
        write_command(at, command)
        write_event(at, command, OPEN_ENDED, f"final: {why}")
