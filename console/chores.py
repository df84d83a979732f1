"""All that a console does by itself while it leads a fleet, behind one door.

Owns the schedules and the order in which they speak: permits first. Sends and records nothing;
core.py does. Must not know threads, clocks or links beyond their count.
"""

from collections.abc import Callable, Sequence

from console.fetching import Fetcher
from console.fleet import FleetReducer
from console.limits import Limits
from console.slots import NewPlan, SlotKeeper
from console.staging import StageKeeper, StageNews, Standing
from console.upkeep import BridgeAsker, PermitKeeper, ProbeKeeper, Saying
from console.view import ModuleView


class Chores:
    """The schedules of one session. ``busy(module)``: whether it owes an answer to a command;
    ``answer_ns``: how long the answer to a question takes on the slowest line (fetching.py);
    ``slots`` None: what the channel carries is not known, and modules report as they like."""

    def __init__(
        self,
        limits: Limits,
        busy: Callable[[ModuleView], bool],
        answer_ns: int,
        slots: SlotKeeper | None = None,
    ) -> None:
        self.permits = PermitKeeper(limits)
        self.stages = StageKeeper(limits)
        self._probes = ProbeKeeper(limits, 0 if slots is None else slots.probe_gap_ns)
        self._bridges = BridgeAsker()
        self._fetcher = Fetcher(busy, answer_ns)
        self._slots = slots

    def news(self, fleet: FleetReducer, t_ns: int) -> list[StageNews]:
        """Stages whose start was agreed now, or that were given up."""
        return self.stages.look(lambda command: _standing(fleet, command), t_ns)

    def due(self, fleet: FleetReducer, links: Sequence[int], t_ns: int) -> list[Saying]:
        """What is to be said now, in this order."""
        console, modules = fleet.console, fleet.modules()
        sayings = self.permits.due(console, links, t_ns)
        sayings += self.stages.due(console, links, t_ns)
        sayings += self._probes.due(console, modules, fleet.clock, t_ns)
        sayings += self._bridges.due(links, t_ns)
        if t_ns >= self._fetcher.next_ns:
            known = {each.module: each for each in modules}
            wanted = fleet.settings_wanted(), fleet.trace_wanted()
            sayings += self._fetcher.due(known, *wanted, t_ns)
        if self._slots is not None:
            sayings += self._slots.due(console, modules, fleet.clock, fleet.report_ms, t_ns)
        return sayings

    def plans(self) -> list[NewPlan]:
        """Links whose channel was shared out since the last call."""
        return [] if self._slots is None else self._slots.plans()

    def wakes_ns(self) -> list[int | None]:
        """When each schedule is due next; None where one waits for something else."""
        keepers = (self.permits, self.stages, self._probes, self._bridges, self._fetcher)
        slots_ns = None if self._slots is None else self._slots.next_ns
        return [*(keeper.next_ns for keeper in keepers), slots_ns]


def _standing(fleet: FleetReducer, command: int) -> Standing:
    view = fleet.command(command)
    if view is None or view.ending:
        return Standing.ENDED
    return Standing.ACCEPTED if view.accepted else Standing.PENDING
