"""A command's life, as the records tell it: ordered, sent, answered, ended once.

Owns the rules by which a command gets its one ending (law 1) and what may still resolve it.
They follow from the records alone and mirror what the exchange decides live, so that a replay
comes to the same end. Must not know timers, links or how an order was typed.
"""

from collections.abc import Callable
from typing import Final

from console.fleet_endings import end_command
from console.fleet_rows import reason_text, write_command, write_event, write_order
from console.fleet_state import AHEAD, OPEN_ENDED, CommandState, FleetState, ModuleState, Moment
from protocol.codes import Activity, AnswerState, Flags, Reason
from protocol.command_phases import Event, event_of
from protocol.message import Answer, Command, Facts, Query
from storage.records import CommandExpired, OrderGiven, OrderVoided, StageStarted

NOT_RECORDED: Final = "not recorded"
STOPPED: Final = reason_text(Reason.STOPPED)
_TAKEN_BACK_BY: Final = {
    "rest": reason_text(Reason.RESTED),
    "lock": reason_text(Reason.LOCKED_OUT),
}
"""Motions that end whatever their module had to do, and why it was cut then."""


# -- what the console did ----------------------------------------------------------------


def plan_order(state: FleetState, at: Moment, record: OrderGiven) -> None:
    """Enter an order and its commands."""
    write_order(at, record)
    for planned in record.commands:
        module = state.ordered_module(planned)
        why = _TAKEN_BACK_BY.get(planned.motion)
        if why is not None:
            withdraw_commands(state, at, module, why)
        command = CommandState(planned, record.order, at.t_ns, module)
        state.commands[planned.command] = command
        _enter_wire_key(state, command)
        module.in_hand[planned.command] = command
        state.touch(module)
        write_command(at, command)
        write_event(at, command, "ordered")


def _enter_wire_key(state: FleetState, command: CommandState) -> None:
    """Make a command findable by what its answers carry. Numbers wrap: the latest one counts."""
    planned = command.planned
    key = (command.module.address, planned.epoch, planned.boot, planned.number)
    state.by_wire[key] = command


def readdress(state: FleetState, module: ModuleState) -> None:
    """Make what may still be answered findable under a module's new address, too."""
    for command in (*module.in_hand.values(), *module.unsure.values()):
        _enter_wire_key(state, command)


def void_order(state: FleetState, at: Moment, record: OrderVoided) -> None:
    """End an order's commands as refused: the log could not take them, so none was sent."""
    for command in state.commands.values():
        if command.order == record.order and command.ending is None:
            end_command(state, at, command, "refused", NOT_RECORDED)
    state.notice(at, f"order {record.order} was not sent: {record.why}")


def start_stage(state: FleetState, at: Moment, record: StageStarted) -> None:
    """Note that an order's motions were told when to begin, or that they will not be."""
    given_up = record.start_ms is None
    event, detail = ("no go", "") if given_up else ("go", f"at {record.start_ms} ms of fleet time")
    for command in state.commands.values():
        if command.order == record.order and command.ending is None:
            write_event(at, command, event, detail)
    if given_up:
        state.notice(at, f"order {record.order} is not started: not every module accepted it")


def note_command_sent(state: FleetState, at: Moment, address: int, message: Command) -> None:
    """Count one sending of a planned command."""
    command = state.by_wire.get((address, message.epoch, message.boot, message.number))
    if command is None:
        return
    command.sends += 1
    first = command.sends == 1
    write_command(at, command)
    write_event(at, command, "sent" if first else "resent", "" if first else f"{command.sends}")


def note_asked(state: FleetState, at: Moment, address: int, message: Query) -> None:
    """Note that a command's answer was asked for again."""
    command = state.by_wire.get((address, message.epoch, message.boot, message.number))
    if command is not None:
        command.asking = True
        write_event(at, command, "asked")


def expire(state: FleetState, at: Moment, record: CommandExpired) -> None:
    """End a command as unseen, for now: a late report may still come."""
    command = state.commands.get(record.command)
    if command is not None and command.ending is None:
        end_command(state, at, command, OPEN_ENDED, "no answer", final=False)


def stop_commands(state: FleetState, at: Moment) -> None:
    """At an all-stop: end what was never sent, and mark the rest as withdrawn."""
    for module in state.modules.values():
        withdraw_commands(state, at, module, STOPPED)


def withdraw_commands(state: FleetState, at: Moment, module: ModuleState, why: str) -> None:
    """End what was never sent to a module, and mark what was: it is only asked about now.

    A rest or a lock-out goes ahead of all that waits, and is as good as sent.
    """
    for command in list(module.in_hand.values()):
        command.withdrawn = why
        if command.sends == 0 and command.planned.motion not in AHEAD:
            end_command(state, at, command, "cut", why)


# -- what the module said ----------------------------------------------------------------


def take_answer(state: FleetState, at: Moment, address: int, message: Answer) -> None:
    """Take what a module says of a command; an answer to none of ours is passed over."""
    command = state.by_wire.get((address, message.epoch, message.boot, message.number))
    if command is None:
        return
    command.module.heard_t_ns = at.t_ns
    state.touch(command.module)
    event = event_of(message)
    if event is None:
        return
    if event is Event.ACCEPTED:
        _accept(at, command, message)
    elif command.final:
        if event is not Event.UNKNOWN:
            _ignore_repeat(at, command, AnswerState(message.state).name.lower())
    else:
        ending = _JUDGES[event](command, message)
        if ending is not None:
            final = ending != OPEN_ENDED
            end_command(state, at, command, ending, _reason(command, message), final=final)


def take_facts(state: FleetState, at: Moment, address: int, message: Facts) -> None:
    """Take a motion's end as measured."""
    command = state.by_wire.get((address, message.epoch, message.boot, message.number))
    if command is None:
        return
    module = command.module
    module.heard_t_ns = at.t_ns
    state.touch(module)
    if command.final:
        _ignore_repeat(at, command, "facts")
        return
    if command.ending is None:
        _come_to_rest(module, message)
    command.facts = message
    cut = message.reason != Reason.NONE
    reason = reason_text(message.reason) if cut else None
    end_command(state, at, command, "cut" if cut else "finished", reason)


def _come_to_rest(module: ModuleState, facts: Facts) -> None:
    """Take how a motion left the module: its own telemetry of that may be lost, and without this
    it would seem to settle for ever."""
    module.face_up = facts.face_after
    module.activity = Activity.STILL
    unsettled = 0 if facts.settled else Flags.UNSETTLED
    module.flags = int(module.flags & ~Flags.UNSETTLED | unsettled)


def _accept(at: Moment, command: CommandState, answer: Answer) -> None:
    command.asking = False
    if command.accepted or command.final:
        _ignore_repeat(at, command, "accepted")
        return
    command.accepted = True
    command.view = None
    write_event(at, command, "accepted", f"expected to take {answer.expect_ms} ms")


def _ignore_repeat(at: Moment, command: CommandState, what: str) -> None:
    command.repeats_ignored += 1
    write_command(at, command)
    write_event(at, command, "repeat ignored", what)


def _reason(command: CommandState, answer: Answer) -> str | None:
    if answer.reason != Reason.NONE:
        return reason_text(answer.reason)
    if answer.state == AnswerState.UNKNOWN:
        never_had_it = command.withdrawn and not command.accepted
        return command.withdrawn if never_had_it else "unknown to the module"
    return None


# Judges say what ending an answer gives a command that is open, or open-ended; None: no other
# than it has.


def _refused(command: CommandState, answer: Answer) -> str | None:
    """The module looked at it and said no. Of one that it has accepted, that is a stray word;
    and of two boxes at one address the other one said it, so that ours may still have moved."""
    if command.accepted:
        return None
    if answer.reason == Reason.OTHER_IDENTITY and command.module.shares_address:
        return OPEN_ENDED if command.ending is None else None
    return "refused"


def _passed(command: CommandState, answer: Answer) -> str | None:
    """The module does not take the number now; of one accepted before, it forgot the answer."""
    if command.ending is not None:
        return None
    return OPEN_ENDED if command.accepted else "refused"


def _disowned(command: CommandState, answer: Answer) -> str | None:
    """The module does not take it in this boot; an earlier copy may have been taken in the last
    one, so only a single copy is known to have been refused."""
    if command.ending is not None:
        return None
    sure = command.sends <= 1 and not (command.accepted or command.withdrawn)
    return "refused" if sure else OPEN_ENDED


def _outlived(command: CommandState, answer: Answer) -> str | None:
    """The module follows another epoch or console by now; what it did before, it has forgotten."""
    return OPEN_ENDED if command.ending is None else None


def _unknown(command: CommandState, answer: Answer) -> str | None:
    """The module has no memory of it. That ends it only where the newest word was a question:
    an answer to an older one may have been overtaken by the acceptance."""
    if command.ending is not None:
        return None
    if command.withdrawn and not command.accepted:
        return "cut"  # It never had it, and what is asked about is not taken afterwards.
    return OPEN_ENDED if command.asking else None


_JUDGES: Final[dict[Event, Callable[[CommandState, Answer], str | None]]] = {
    Event.FINISHED: lambda command, answer: "finished",
    Event.CUT: lambda command, answer: "cut",
    Event.REFUSED: _refused,
    Event.PASSED: _passed,
    Event.DISOWNED: _disowned,
    Event.OUTLIVED: _outlived,
    Event.UNKNOWN: _unknown,
}
