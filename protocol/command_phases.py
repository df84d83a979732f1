"""The life of a command as the console sees it: phases, events, and the table between them.

Owns which event does what in which phase, and how a reply is read as an event. Pure data and
one pure function; exchange.py carries it out and knows of timers and sends.

WAITING   behind another command of its module, nothing sent
CALLING   sent, no answer yet; sent again each round-trip timeout, a bounded number of times
RUNNING   accepted; nothing to do until it should be over
ASKING    accepted and overdue; a Query each timeout, a bounded number of times
RECALLED  sent, no answer, then withdrawn; a Query each timeout, never the command again

=====================  ========================================================
event                  what it does
=====================  ========================================================
turn                   WAITING: send, to CALLING
timer due              CALLING, ASKING, RECALLED: send again, or end unseen
                       RUNNING: ask, to ASKING
accepted               CALLING, RECALLED: to RUNNING; ASKING: the same, but not
                       for ever, then end unseen
finished, cut          everywhere but WAITING: end finished or cut
refused                CALLING, RECALLED: end refused
number passed          CALLING, RECALLED: end refused; RUNNING, ASKING: unseen
other boot             CALLING: end refused if only one copy was sent, else
                       unseen; RUNNING, ASKING, RECALLED: end unseen
other epoch or owner   everywhere but WAITING: end unseen
unknown                ASKING: end unseen; RECALLED: end cut
restarted              everywhere: end unseen
withdrawn              WAITING: end cut; CALLING: to RECALLED
=====================  ========================================================

Whatever the table does not name is ignored: late, repeated and stray replies.

A module that replies "other boot", "other epoch", "owned" or "number passed" says that it does
not take the command now, not that it never did. So once a command is known to have been accepted,
or where the boot before may have taken an earlier copy, such a reply ends it as unseen. An epoch or
an owner may change between two copies that the air itself made of one send, in far less time than
a restart takes: so of those two not even the only copy is known to have been refused.
"""

from enum import Enum, auto, unique
from typing import Final

from protocol.codes import AnswerState, Reason
from protocol.message import Answer, Facts


@unique
class Phase(Enum):
    """Where a command is; see the module's table."""

    WAITING = auto()
    CALLING = auto()
    RUNNING = auto()
    ASKING = auto()
    RECALLED = auto()


@unique
class Event(Enum):
    """What can happen to a command; see the module's table."""

    TURN = auto()
    DUE = auto()
    ACCEPTED = auto()
    FINISHED = auto()
    CUT = auto()
    REFUSED = auto()
    PASSED = auto()
    DISOWNED = auto()
    """The module has no memory of the command's boot."""
    OUTLIVED = auto()
    """It follows another epoch or another console by now."""
    UNKNOWN = auto()
    RESTARTED = auto()
    WITHDRAWN = auto()


@unique
class Act(Enum):
    """What is done about it."""

    CALL = auto()
    TRY_AGAIN = auto()
    RUN = auto()
    ASK = auto()
    RECALL = auto()
    END_FINISHED = auto()
    END_CUT = auto()
    END_REFUSED = auto()
    END_REFUSED_IF_ONE_COPY = auto()
    END_UNSEEN = auto()


TRANSITIONS: Final[dict[tuple[Phase, Event], Act]] = {
    (Phase.WAITING, Event.TURN): Act.CALL,
    (Phase.WAITING, Event.WITHDRAWN): Act.END_CUT,
    (Phase.WAITING, Event.RESTARTED): Act.END_UNSEEN,
    (Phase.CALLING, Event.DUE): Act.TRY_AGAIN,
    (Phase.CALLING, Event.ACCEPTED): Act.RUN,
    (Phase.CALLING, Event.FINISHED): Act.END_FINISHED,
    (Phase.CALLING, Event.CUT): Act.END_CUT,
    (Phase.CALLING, Event.REFUSED): Act.END_REFUSED,
    (Phase.CALLING, Event.PASSED): Act.END_REFUSED,
    (Phase.CALLING, Event.DISOWNED): Act.END_REFUSED_IF_ONE_COPY,
    (Phase.CALLING, Event.OUTLIVED): Act.END_UNSEEN,
    (Phase.CALLING, Event.RESTARTED): Act.END_UNSEEN,
    (Phase.CALLING, Event.WITHDRAWN): Act.RECALL,
    (Phase.RUNNING, Event.DUE): Act.ASK,
    (Phase.RUNNING, Event.FINISHED): Act.END_FINISHED,
    (Phase.RUNNING, Event.CUT): Act.END_CUT,
    (Phase.RUNNING, Event.PASSED): Act.END_UNSEEN,
    (Phase.RUNNING, Event.DISOWNED): Act.END_UNSEEN,
    (Phase.RUNNING, Event.OUTLIVED): Act.END_UNSEEN,
    (Phase.RUNNING, Event.RESTARTED): Act.END_UNSEEN,
    (Phase.ASKING, Event.DUE): Act.TRY_AGAIN,
    (Phase.ASKING, Event.ACCEPTED): Act.RUN,
    (Phase.ASKING, Event.FINISHED): Act.END_FINISHED,
    (Phase.ASKING, Event.CUT): Act.END_CUT,
    (Phase.ASKING, Event.PASSED): Act.END_UNSEEN,
    (Phase.ASKING, Event.DISOWNED): Act.END_UNSEEN,
    (Phase.ASKING, Event.OUTLIVED): Act.END_UNSEEN,
    (Phase.ASKING, Event.UNKNOWN): Act.END_UNSEEN,
    (Phase.ASKING, Event.RESTARTED): Act.END_UNSEEN,
    (Phase.RECALLED, Event.DUE): Act.TRY_AGAIN,
    (Phase.RECALLED, Event.ACCEPTED): Act.RUN,
    (Phase.RECALLED, Event.FINISHED): Act.END_FINISHED,
    (Phase.RECALLED, Event.CUT): Act.END_CUT,
    (Phase.RECALLED, Event.REFUSED): Act.END_REFUSED,
    (Phase.RECALLED, Event.PASSED): Act.END_REFUSED,
    (Phase.RECALLED, Event.DISOWNED): Act.END_UNSEEN,
    (Phase.RECALLED, Event.OUTLIVED): Act.END_UNSEEN,
    (Phase.RECALLED, Event.UNKNOWN): Act.END_CUT,
    (Phase.RECALLED, Event.RESTARTED): Act.END_UNSEEN,
}

_BY_STATE: Final[dict[int, Event]] = {
    AnswerState.ACCEPTED: Event.ACCEPTED,
    AnswerState.REFUSED: Event.REFUSED,
    AnswerState.FINISHED: Event.FINISHED,
    AnswerState.CUT: Event.CUT,
    AnswerState.UNKNOWN: Event.UNKNOWN,
}

_BY_STATE_AND_REASON: Final[dict[tuple[int, int], Event]] = {
    (AnswerState.REFUSED, Reason.OTHER_BOOT): Event.DISOWNED,
    (AnswerState.REFUSED, Reason.OTHER_EPOCH): Event.OUTLIVED,
    (AnswerState.REFUSED, Reason.OWNED): Event.OUTLIVED,
    (AnswerState.REFUSED, Reason.NUMBER_PASSED): Event.PASSED,
    (AnswerState.UNKNOWN, Reason.OTHER_BOOT): Event.DISOWNED,
    (AnswerState.UNKNOWN, Reason.OTHER_EPOCH): Event.OUTLIVED,
}


def event_of(reply: Answer | Facts) -> Event | None:
    """Read a module's reply as an event; None for a state that this version does not know."""
    if isinstance(reply, Facts):
        return Event.FINISHED if reply.reason == Reason.NONE else Event.CUT
    special = _BY_STATE_AND_REASON.get((reply.state, reply.reason))
    return _BY_STATE.get(reply.state) if special is None else special
