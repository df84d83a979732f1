"""The fleet's mutable state, as one fold over the records leaves it.

Owns the state types and how they are found: by identity, by sender, by wire number. Must not
know rows, views or what a message means; the fleet_* modules beside it change and read it.

Classes are mutable and slotted, since telemetry changes a module some thousand times for each
picture that is made of it.
"""

from collections import deque
from dataclasses import dataclass, field
from typing import Final

from console.errors import LogError
from console.fleet_parts import BridgeState, ClockState, FaultState, SettingsState
from console.view import CommandView, ModuleView, Outcome
from protocol.codes import Flags, is_simulated
from protocol.frame import FrameDecoder
from protocol.message import Facts, Packet
from protocol.trace import TraceFetch
from storage.records import PlannedCommand, SheetOpened
from storage.rows import ModuleRow, Row

RIBBON_LENGTH: Final = 20
"""Outcomes of a module that a picture shows."""

NOTICES_KEPT: Final = 50
"""Lines for a person that a picture carries; older ones are in the log's alarms."""

MOTIONS: Final = frozenset({"pivot", "hop", "twist"})
"""What brakes the wheel and so has an outcome; all else just ends."""

AHEAD: Final = frozenset({"rest", "lock"})
"""What goes ahead of all else that a module has to do."""

LATCHED: Final = int(Flags.LATCHED)
LOCKED_OUT: Final = int(Flags.LOCKED_OUT)
FAULTY: Final = int(Flags.FAULTY)
WATCHED: Final = LATCHED | LOCKED_OUT | FAULTY
"""Flags whose coming and going is more than a figure: ModuleState.conditions."""

OPEN_ENDED: Final = "unseen"
"""The one ending that a late report may still resolve, as long as it is not final."""


@dataclass(slots=True)
class Step:
    """What one record led to: rows for the log, inbound packets with the link each came over,
    and the commands that got their ending (once each: a late resolution is not a new one)."""

    rows: list[Row] = field(default_factory=list)
    packets: list[tuple[int, Packet]] = field(default_factory=list)
    ended: list[int] = field(default_factory=list)


@dataclass(slots=True, eq=False)
class Moment:
    """Where in the stream something happens. ``message`` counts messages within the record;
    ``link`` is -1 where no link is concerned."""

    number: int
    t_ns: int
    step: Step
    link: int = -1
    message: int = 0

    @property
    def part(self) -> int:
        """A count that is unique within the record, whatever the table."""
        return len(self.step.rows)


@dataclass(slots=True, eq=False)
class TraceState:
    """The trace of a motion while it is fetched. ``asked``: questions since the last chunk that
    was new; ``refused``: whether a chunk that contradicts the others was told of."""

    command: "CommandState"
    fetch: TraceFetch = field(default_factory=TraceFetch)
    asked: int = 0
    refused: bool = False


@dataclass(slots=True, eq=False)
class ModuleState:
    """One module. ``arrived`` has a bit for each of the last sequence numbers, the newest in
    bit 0; ``span`` says how many of them there have been in this boot, 0 before the first.
    ``conditions``: which of the watched flags stand, by its newest word of whatever kind."""

    module: int
    identity: int
    address: int
    link: int
    boot: int
    name: str
    kind: str = ""
    firmware: int = 0
    wheel_max_rpm: int = 0
    epoch: int = 0
    boots: set[int] = field(default_factory=set)
    shares_address: bool = False
    console: int = 0
    owner_left_ms: int = 0
    owner_heard_ns: int = 0
    owner_told: int = 0
    stop_number: int = 0
    conditions: int = 0
    locked_by: str = ""
    activity: int = 0
    flags: int = 0
    face_up: int = 0
    wheel_rpm: int = 0
    battery_mV: int = 0
    temperature_cC: int = 0
    heard_t_ns: int = 0
    sequence: int = -1
    report_ms: int | None = None
    arrived: int = 0
    span: int = 0
    in_hand: "dict[int, CommandState]" = field(default_factory=dict)
    unsure: "dict[int, CommandState]" = field(default_factory=dict)
    ribbon: "deque[CommandState]" = field(default_factory=lambda: deque(maxlen=RIBBON_LENGTH))
    clock: ClockState = field(default_factory=ClockState)
    settings: SettingsState = field(default_factory=SettingsState)
    faults: FaultState = field(default_factory=FaultState)
    trace: TraceState | None = None
    row: ModuleRow | None = None
    view: ModuleView | None = None

    @property
    def simulated(self) -> bool:
        """Whether its identity carries the simulated mark."""
        return is_simulated(self.identity)

    @property
    def latched(self) -> bool:
        """Whether it holds an all-stop."""
        return bool(self.conditions & LATCHED)

    @property
    def faults_shown(self) -> tuple[str, ...]:
        """Names of the faults that stand; ``unnamed`` where only a flag has told of one."""
        unnamed = ("unnamed",) if self.conditions & FAULTY else ()
        return self.faults.shown or unnamed

    @property
    def locked_out_by(self) -> str | None:
        """Who has locked it out; None for nobody, empty where the name is not known."""
        return self.locked_by if self.conditions & LOCKED_OUT else None

    def set_condition(self, bit: int, stands: bool) -> None:
        """Note that a watched flag stands, or no longer does."""
        self.conditions = self.conditions | bit if stands else self.conditions & ~bit


@dataclass(slots=True, eq=False)
class CommandState:
    """One command. ``asking``: a question about it is out, unanswered; ``withdrawn``: why
    it is not to be sent again, stopped or rested, or empty; ``final``: nothing can change its
    ending any more."""

    planned: PlannedCommand
    order: int
    t_ns: int
    module: ModuleState
    sends: int = 0
    repeats_ignored: int = 0
    accepted: bool = False
    asking: bool = False
    withdrawn: str = ""
    ending: str | None = None
    reason: str | None = None
    final: bool = False
    ended_t_ns: int | None = None
    facts: Facts | None = None
    outcome: Outcome | None = None
    view: CommandView | None = None


@dataclass(slots=True, eq=False)
class LinkState:
    """One link: a decoder for each direction, and what has come and gone."""

    link: int
    url: str = ""
    state: str = ""
    inbound: FrameDecoder = field(default_factory=FrameDecoder)
    outbound: FrameDecoder = field(default_factory=FrameDecoder)
    frames_in: int = 0
    frames_out: int = 0
    dropped: int = 0
    bytes_in: int = 0
    bytes_out: int = 0
    reasons: dict[str, int] = field(default_factory=dict)
    refused: dict[int, str] = field(default_factory=dict)
    drops_at: deque[int] = field(default_factory=deque)
    bad: bool = False

    @property
    def gone(self) -> bool:
        """Whether it was lost or closed."""
        return self.state in {"lost", "closed"}


@dataclass(slots=True, eq=False)
class StopState:
    """The all-stop. ``newest``: highest number known; ``lifted``: highest that this session
    cleared; ``told``: highest whose full confirmation a notice has told of."""

    newest: int = 0
    lifted: int = 0
    in_force: bool = False
    told: int = 0


@dataclass(slots=True, eq=False)
class FleetState:
    """Everything. ``unknown_heard``: somebody was heard whom no Presence explains;
    ``changed``: a module's picture is no longer true."""

    epoch: int = 0
    console: int = 0
    highest_epoch: int = 0
    sealed: bool = False
    opened_utc: str = ""
    operator: str = ""
    closed: bool = False
    modules: dict[int, ModuleState] = field(default_factory=dict)
    by_identity: dict[int, ModuleState] = field(default_factory=dict)
    by_sender: dict[tuple[int, int, int], ModuleState] = field(default_factory=dict)
    commands: dict[int, CommandState] = field(default_factory=dict)
    by_wire: dict[tuple[int, int, int, int], CommandState] = field(default_factory=dict)
    links: dict[int, LinkState] = field(default_factory=dict)
    bridges: dict[int, BridgeState] = field(default_factory=dict)
    sheets: dict[int, SheetOpened] = field(default_factory=dict)
    conflicts: set[tuple[int, int]] = field(default_factory=set)
    stop: StopState = field(default_factory=StopState)
    notices: deque[tuple[int, str]] = field(default_factory=lambda: deque(maxlen=NOTICES_KEPT))
    unknown_heard: bool = False
    changed: bool = True

    def link_of(self, link: int) -> LinkState:
        """The link of this count, made where it is new."""
        state = self.links.get(link)
        if state is None:
            state = self.links[link] = LinkState(link)
        return state

    def ordered_module(self, planned: PlannedCommand) -> ModuleState:
        """The module that a command is meant for. Raises LogError where none is known."""
        try:
            return self.modules[planned.module]
        except KeyError as error:
            raise LogError(
                f"command {planned.command} is for module {planned.module}, of which no record "
                "tells; the session's records are not whole"
            ) from error

    def touch(self, module: ModuleState) -> None:
        """Mark a module's picture as no longer true."""
        module.view = None
        self.changed = True

    def notice(self, at: Moment, text: str) -> None:
        """Add a line that a person should read."""
        self.notices.append((at.t_ns, text))
