"""Asking for what modules keep: their settings, and the traces of their last motions.

Owns when a question is asked again and when it is given up; what is still wanted, the reducer
knows (fleet.py). Questions go out in the gaps: one at a time, to a module that owes no answer to
a command, and so seldom that what comes back fills a quarter of the line at most.
"""

from collections.abc import Callable, Sequence
from typing import Final

from console.limits import NS_PER_MS
from console.upkeep import Saying
from console.view import ModuleView
from protocol.codes import identity_bits
from protocol.message import SettingAsk, TraceAsk
from protocol.trace import ASK_AT_ONCE

ASK_AGAIN_NS: Final = 300 * NS_PER_MS
"""Above the time of eight chunks and a round trip on a slow air."""
GIVE_UP_AFTER: Final = 10
"""Questions in a row that brought nothing."""
ANSWER_BYTES: Final = ASK_AT_ONCE * 64
"""What one question brings at most: so many chunks, each a whole frame."""
SHARE_OF_LINE: Final = 4
"""A question waits this many times as long as its answer takes."""

SettingWanted = tuple[int, int]
"""Module and setting."""
TraceWanted = tuple[int, int, int, int, int, int, int]
"""Module, epoch, boot, command number, identity, first chunk, mask of the chunks wanted."""


class _Patience:
    """Counts questions about one thing; begins anew where an answer changed what is asked."""

    __slots__ = ("asked", "due_ns", "question")

    def __init__(self) -> None:
        self.question: object = None
        self.asked = 0
        self.due_ns = 0

    def ask(self, question: object, t_ns: int) -> bool:
        """Whether to ask this now."""
        if question != self.question:
            self.question, self.asked, self.due_ns = question, 0, t_ns
        if self.asked >= GIVE_UP_AFTER or t_ns < self.due_ns:
            return False
        self.asked += 1
        self.due_ns = t_ns + ASK_AGAIN_NS
        return True


class Fetcher:
    """Says which question is due. ``busy(module)``: whether it owes an answer to a command;
    ``answer_ns``: how long ANSWER_BYTES take on the slowest line."""

    def __init__(self, busy: Callable[[ModuleView], bool], answer_ns: int) -> None:
        self._busy = busy
        self._gap_ns = answer_ns * SHARE_OF_LINE
        self._settings: dict[int, _Patience] = {}
        self._traces: dict[tuple[int, int], _Patience] = {}
        self.next_ns = 0

    def due(
        self,
        modules: dict[int, ModuleView],
        settings: Sequence[SettingWanted],
        traces: Sequence[TraceWanted],
        t_ns: int,
    ) -> list[Saying]:
        """At most one question, settings first: a session begins with them."""
        self.next_ns = t_ns + self._gap_ns
        self._forget(traces)
        for module, setting in settings:
            patience = self._settings.setdefault(module, _Patience())
            if self._may(modules, module) and patience.ask((module, setting), t_ns):
                return [_saying(modules[module], SettingAsk(setting))]
        for wanted in traces:
            module, number = wanted[0], wanted[3]
            patience = self._traces.setdefault((module, number), _Patience())
            if self._may(modules, module) and patience.ask(wanted, t_ns):
                return [_saying(modules[module], _trace_ask(wanted))]
        return []

    def _may(self, modules: dict[int, ModuleView], module: int) -> bool:
        view = modules.get(module)
        return view is not None and not self._busy(view)

    def _forget(self, traces: Sequence[TraceWanted]) -> None:
        """Drop what is no longer wanted, so that a long session does not fill memory."""
        wanted = {(each[0], each[3]) for each in traces}
        for gone in self._traces.keys() - wanted:
            del self._traces[gone]


def _trace_ask(wanted: TraceWanted) -> TraceAsk:
    _, epoch, boot, number, identity, first, mask = wanted
    return TraceAsk(epoch, boot, number, identity_bits(identity), first, mask)


def _saying(module: ModuleView, message: SettingAsk | TraceAsk) -> Saying:
    return Saying(module.link, module.address, message)
