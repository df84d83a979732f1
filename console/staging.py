"""Starting staged motions together: when Go is said, and when a stage is given up.

Owns the stages that wait for their Go. Knows orders' commands only by what became of them; sends
nothing itself. Rules: WIRE.md, "Together".
"""

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from enum import Enum, auto
from typing import Final

from console.limits import NS_PER_MS, Limits
from console.upkeep import Saying, fleet_ms
from protocol.codes import EVERYONE_ADDRESS
from protocol.message import Go

GO_PERIOD_NS: Final = 50 * NS_PER_MS
_STAGES: Final = 255


class Standing(Enum):
    """Where a staged command is, as far as its stage is concerned."""

    PENDING = auto()
    ACCEPTED = auto()
    ENDED = auto()


@dataclass(slots=True)
class _Stage:
    """One order whose commands wait. ``start_ns``: agreed start, None before all accepted."""

    order: int
    stage: int
    commands: tuple[int, ...]
    start_ns: int | None = None
    next_ns: int = 0


@dataclass(frozen=True, slots=True)
class StageNews:
    """An order whose start was agreed now (``start_ns``), or which was given up (None)."""

    order: int
    start_ns: int | None


class StageKeeper:
    """Keeps stages from their order to their start."""

    def __init__(self, limits: Limits) -> None:
        self._limits = limits
        self._last = 0
        self._waiting: list[_Stage] = []

    def new_stage(self) -> int:
        """A stage number, 1 to 255, that no waiting stage has. Numbers come round after 255
        orders, long after a Go for the last one of that number has passed its time."""
        self._last = self._last % _STAGES + 1
        return self._last

    def wait_for(self, order: int, stage: int, commands: Iterable[int]) -> None:
        """Watch over a staged order."""
        self._waiting.append(_Stage(order, stage, tuple(commands)))

    @property
    def next_ns(self) -> int | None:
        """When Go is next due, None where nothing was agreed."""
        return min((each.next_ns for each in self._waiting if each.start_ns), default=None)

    def abandon_all(self) -> None:
        """All-stop: nothing that waits will be started."""
        self._waiting.clear()

    def look(self, standing: Callable[[int], Standing], t_ns: int) -> list[StageNews]:
        """See which stages are complete, and which can no longer be."""
        news = []
        for stage in [each for each in self._waiting if each.start_ns is None]:
            stands = {standing(command) for command in stage.commands}
            if Standing.ENDED in stands:
                self._waiting.remove(stage)
                news.append(StageNews(stage.order, None))
            elif stands == {Standing.ACCEPTED}:
                stage.start_ns = t_ns + self._limits.stage_lead_ns
                stage.next_ns = t_ns
                news.append(StageNews(stage.order, stage.start_ns))
        return news

    def due(self, console: int, links: Iterable[int], t_ns: int) -> list[Saying]:
        """Go for each agreed start, again and again until its time has come."""
        on = list(links)
        sayings: list[Saying] = []
        for stage in list(self._waiting):
            if stage.start_ns is None or t_ns < stage.next_ns:
                continue
            if t_ns >= stage.start_ns:
                self._waiting.remove(stage)
                continue
            stage.next_ns = t_ns + GO_PERIOD_NS
            go = Go(console, stage.stage, fleet_ms(stage.start_ns))
            sayings += [Saying(link, EVERYONE_ADDRESS, go, urgent=True) for link in on]
        return sayings
