"""A motion that waits for its Go: one at a time, from its acceptance to its start or its end.

Owns when it starts and when it is too late for it. Knows no wheel and no interlocks: works.py
asks it what is due, and looks at those itself. Time is an argument.
"""

from typing import NamedTuple

from protocol.allegiance import ms_until
from protocol.message import Go, Motion
from sim_link.box import Boot


class Due(NamedTuple):
    """A staged motion whose time has come. ``called``: a Go named this time; otherwise it is the
    one after which it must not start."""

    command: Motion
    called: bool


class Stage:
    """What one module has staged: a motion or nothing."""

    def __init__(self) -> None:
        self._command: Motion | None = None
        self._called = False
        self.due_ns: int | None = None
        """When it starts, or is too late; None while nothing waits."""

    @property
    def waits(self) -> bool:
        """Whether a motion is staged."""
        return self._command is not None

    def put(self, command: Motion, boot: Boot, t_ns: int) -> int:
        """Let a motion wait; return the milliseconds until it must not start any more."""
        left_ms = ms_until(command.latest_ms, boot.time.ms(t_ns))
        self._command, self._called = command, False
        self.due_ns = boot.time.after_ns(t_ns, left_ms + 1)
        return left_ms

    def hear(self, go: Go, boot: Boot, t_ns: int) -> None:
        """Take the start of a stage, if it is the followed console's, in time, and not too late.
        The last one that was heard in time counts."""
        start_ms = boot.allegiance.module_ms(go.start_ms)
        command, followed = self._command, go.console == boot.allegiance.console
        if command is None or start_ms is None or not followed or go.stage != command.stage:
            return
        left_ms = ms_until(start_ms, boot.time.ms(t_ns))
        if left_ms > 0 and ms_until(command.latest_ms, start_ms) >= 0:
            self._called = True
            self.due_ns = boot.time.after_ns(t_ns, left_ms)

    def take(self, t_ns: int) -> Due | None:
        """Take what is due by ``t_ns`` off the stage; None where nothing is."""
        if self.due_ns is None or self.due_ns > t_ns:
            return None
        called, command = self._called, self.erase()
        return None if command is None else Due(command, called)

    def erase(self) -> Motion | None:
        """Let nothing wait any more; return what did."""
        command = self._command
        self._command = self.due_ns = None
        return command
