"""Parts of the fleet's state that have rules of their own: clocks, settings, faults, bridges.

Owns their types, mutable and slotted as those of fleet_state.py, which holds them. The rules are
in fleet_clock.py, fleet_kept.py, fleet_conditions.py and fleet_reports.py. Must not know modules,
rows or views.
"""

from collections import deque
from dataclasses import dataclass, field
from typing import Final

from protocol.clock import SAMPLES_KEPT, ModuleClock
from protocol.message import BridgeStatus, SettingValue

CLOCK_RESOLUTION_NS: Final = 2_000
"""Both clocks' microseconds, rounded."""


@dataclass(slots=True, eq=False)
class ClockState:
    """A module's clock over its present link. ``probes``: when each of the last was sent, by
    sequence and boot, None for one that was sent twice. ``figures``: time of the last
    exchange, and offset, bound and shortest round trip as of then. ``bad_boot``: the boot whose
    timestamps were last told to be bad."""

    clock: ModuleClock = field(default_factory=lambda: ModuleClock(CLOCK_RESOLUTION_NS))
    probes: dict[tuple[int, int], int | None] = field(default_factory=dict)
    delays_ns: deque[int] = field(default_factory=lambda: deque(maxlen=SAMPLES_KEPT))
    figures: tuple[int, int, int, int] | None = None
    errors: int = 0
    bad_boot: int | None = None

    def void(self) -> None:
        """Forget what was measured: the module restarted, or went to another link."""
        self.clock.void()
        self.probes.clear()
        self.delays_ns.clear()
        self.figures = None


@dataclass(slots=True, eq=False)
class SettingsState:
    """What was read of a module's settings. ``doubtful``: those to be read again after a write,
    by number: the value that was written (None: not known whether it was), and how often
    another was read since. ``shown`` is what pictures show of ``read``."""

    total: int = 0
    read: dict[int, SettingValue] = field(default_factory=dict)
    doubtful: dict[int, tuple[int | None, int]] = field(default_factory=dict)
    shown: tuple[tuple[int, int], ...] = ()


@dataclass(slots=True, eq=False)
class FaultState:
    """A module's faults. ``told``: time_ms and standing of the newest notice of each, in this
    boot; ``standing``: codes; ``shown``: their names."""

    told: dict[int, tuple[int, int]] = field(default_factory=dict)
    standing: set[int] = field(default_factory=set)
    shown: tuple[str, ...] = ()


@dataclass(slots=True, eq=False)
class BridgeState:
    """The last word of a link's bridge."""

    status: BridgeStatus
    heard_t_ns: int
