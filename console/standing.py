"""What the console keeps doing by itself: calling the roll, and repeating stops and clears.

Owns two small schedules. Time is an argument; neither sends anything, they say what is due.
"""

from collections.abc import Callable
from typing import Final

from console.view import FleetView, ModuleView

ROLL_OPENING_CALLS: Final = 4
ROLL_OPENING_PERIOD_NS: Final = 300_000_000
ROLL_HASTE_PERIOD_NS: Final = 500_000_000
ROLL_CALM_PERIOD_NS: Final = 10_000_000_000
ROLL_LOOK_NS: Final = 100_000_000
"""How often the fleet is looked at for strangers, between calls."""
STOP_PERIOD_NS: Final = 150_000_000
"""Above the round trip of a busy half-duplex channel, below what a person would wait."""
STOP_LOOK_NS: Final = 30_000_000
"""How often the confirmations are looked at; a fifth of the period that they steer."""
STOP_CALM_AFTER: Final = 40
STOP_CALM_PERIOD_NS: Final = 1_000_000_000


class RollCaller:
    """Says when to call the roll: often at the opening and while somebody is unexplained."""

    def __init__(self) -> None:
        self._calls = 0
        self._last_ns: int | None = None
        self._looked_ns: int | None = None
        self.next_ns: int = 0

    def hurry(self) -> None:
        """Call at the next chance: a newer epoch is to be offered."""
        self.next_ns = 0

    def due(self, strange: Callable[[], bool], t_ns: int) -> bool:
        """Whether to call now. ``strange``: whether somebody is heard, but not known in full;
        asked only where the answer matters, since it looks at every module."""
        if t_ns < self.next_ns:
            hasty_ns = None if self._last_ns is None else self._last_ns + ROLL_HASTE_PERIOD_NS
            if hasty_ns is None or t_ns < hasty_ns or not self._look(strange, t_ns):
                return False
        self._calls += 1
        self._last_ns = t_ns
        opening = self._calls < ROLL_OPENING_CALLS
        self.next_ns = t_ns + (ROLL_OPENING_PERIOD_NS if opening else ROLL_CALM_PERIOD_NS)
        return True

    def _look(self, strange: Callable[[], bool], t_ns: int) -> bool:
        if self._looked_ns is not None and t_ns < self._looked_ns + ROLL_LOOK_NS:
            return False
        self._looked_ns = t_ns
        return strange()


def unexplained(fleet: FleetView, unknown_heard: bool) -> bool:
    """Whether the roll must be called: a stranger, a module that does not follow this console
    though nobody else owns it, or no nameplate."""
    return unknown_heard or any(
        not module.kind or (not follows(module, fleet) and not owned_by_another(module, fleet))
        for module in fleet.modules
    )


def follows(module: ModuleView, fleet: FleetView) -> bool:
    """Whether the module follows this console, as last heard."""
    return (module.epoch, module.console) == (fleet.epoch, fleet.console)


def owned_by_another(module: ModuleView, fleet: FleetView) -> bool:
    """Whether another console owns the module: as long as it said, and a little for the way."""
    if module.console in (0, fleet.console):
        return False
    return fleet.t_ns < module.owner_heard_ns + module.owner_left_ms * 1_000_000


class StopKeeper:
    """Says to which modules a stop or a clear must be sent again, and when."""

    def __init__(self) -> None:
        self._rounds = 0
        self._looked_ns: int | None = None
        self.next_ns: int | None = None

    def hurry(self, t_ns: int) -> None:
        """Begin anew: a stop or a clear was given just now to everyone."""
        self._rounds = 0
        self.next_ns = t_ns + STOP_PERIOD_NS

    def due(self, look: Callable[[], FleetView], t_ns: int) -> tuple[ModuleView, ...]:
        """Modules that have not confirmed what is in force, each time a round is due.

        While a stop is in force: those that have not confirmed it. Otherwise: those that still
        report a latch of it. ``look`` makes a picture of the fleet; it is asked for no more
        often than STOP_LOOK_NS.
        """
        round_due = self.next_ns is not None and t_ns >= self.next_ns
        looked_just_now = self._looked_ns is not None and t_ns < self._looked_ns + STOP_LOOK_NS
        if looked_just_now and not round_due:
            return ()
        self._looked_ns = t_ns
        waiting = self._waiting(look())
        if not waiting:
            self.next_ns = None
            return ()
        if self.next_ns is None:
            self.hurry(t_ns)
        if self.next_ns is None or t_ns < self.next_ns:
            return ()
        self._rounds += 1
        calm = self._rounds > STOP_CALM_AFTER
        self.next_ns = t_ns + (STOP_CALM_PERIOD_NS if calm else STOP_PERIOD_NS)
        return waiting

    @staticmethod
    def _waiting(view: FleetView) -> tuple[ModuleView, ...]:
        if view.stop.in_force:
            return tuple(each for each in view.modules if each.module in view.stop.missing)
        return tuple(each for each in view.modules if each.latched)
