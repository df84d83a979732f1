"""Views: the immutable pictures of the fleet that screens and sheets read.

Owns their types only. The reducer makes them (fleet.py); nobody changes them.
"""

from dataclasses import dataclass
from enum import StrEnum
from typing import Protocol


class Outcome(StrEnum):
    """The verdict on a motion."""

    LANDED = "landed"
    SHORT = "short"
    OVER = "over"
    STUCK = "stuck"
    ADRIFT = "adrift"
    REFUSED = "refused"
    CUT = "cut"
    UNSEEN = "unseen"


@dataclass(frozen=True, slots=True)
class ModuleView:
    """One module as last known. Times are the session's monotonic nanoseconds; ``heard_t_ns``
    is None before its first word. ``signal`` is the part of its last telemetry that arrived."""

    module: int
    identity: int
    simulated: bool
    address: int
    link: int
    name: str
    kind: str
    boot: int
    epoch: int
    wheel_max_rpm: int
    wheel_rpm: int
    battery_V: float
    temperature_C: float
    face_up: int
    activity: int
    flags: int
    latched: bool
    stop_number: int
    heard_t_ns: int | None
    signal: float
    outcomes: tuple[Outcome, ...]
    doing: str
    """The command in hand, in words, or empty."""
    shares_address: bool = False
    """Whether another box was heard at its address."""
    console: int = 0
    """Console that it follows, 0 for none, as its last presence said; ``owner_left_ms``: how long
    it follows no other from ``owner_heard_ns`` on."""
    owner_left_ms: int = 0
    owner_heard_ns: int = 0
    locked_by: str | None = None
    """Who has locked it out: None for nobody, empty where the name is not known."""
    faults: tuple[str, ...] = ()
    """Faults that stand, lower-case names, in the order of their codes; ``unnamed`` alone where
    only a flag has told of one."""
    clock_bound_ms: float | None = None
    """How far the console's estimate of its clock may be wrong, as of its last word;
    ``clock_offset_ms``: module time less fleet time, as of the last exchange. None before one."""
    clock_offset_ms: float | None = None
    round_trip_ms: float | None = None
    """Shortest of the last eight exchanges."""
    groups: int = 0
    """Bit n: it is in group n; 0 before its settings were read."""
    settings: tuple[tuple[int, int], ...] = ()
    """Setting number and value of those read so far, in order; ``settings_total``: how many it
    has, 0 before one was read."""
    settings_total: int = 0
    permitted: bool = False
    """Whether it holds a drive permit."""
    staged: bool = False
    """Whether a motion waits for its Go."""


@dataclass(frozen=True, slots=True)
class CommandView:
    """One command and what became of it; ``ending`` is empty while it runs."""

    command: int
    module: int
    motion: str
    trial: int
    sends: int
    repeats_ignored: int
    ending: str
    reason: str
    final: bool
    outcome: Outcome | None
    accepted: bool = False


@dataclass(frozen=True, slots=True)
class StopView:
    """The all-stop: its newest number (0: none yet), whether it is in force, who confirmed.

    ``confirmed`` and ``missing`` are module counts of this session (ModuleView.module).
    """

    stop_number: int
    in_force: bool
    confirmed: tuple[int, ...]
    missing: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class LinkView:
    """One link: where it leads, and what came over it."""

    link: int
    url: str
    state: str
    frames_in: int
    frames_out: int
    dropped: int
    bytes_in: int
    bytes_out: int


@dataclass(frozen=True, slots=True)
class BridgeView:
    """The bridge of one link, as it last said of itself; counts are since its start."""

    link: int
    uptime_ms: int
    frames_from_console: int
    frames_to_console: int
    dropped: int
    queue: int
    queue_most: int
    signal_dBm: int
    noise_dBm: int
    heard_t_ns: int


@dataclass(frozen=True, slots=True)
class FleetView:
    """The whole fleet at one moment. ``notices`` are the newest lines a person should read,
    oldest first, each (t_ns, text)."""

    t_ns: int
    opened_utc: str
    operator: str
    epoch: int
    simulated: bool
    modules: tuple[ModuleView, ...]
    links: tuple[LinkView, ...]
    stop: StopView
    notices: tuple[tuple[int, str], ...]
    closed: bool
    sealed: bool = False
    console: int = 0
    bridges: tuple[BridgeView, ...] = ()


class FleetSource(Protocol):
    """What a screen needs: the engine gives it live, a replay gives it from the log."""

    def view(self) -> FleetView:
        """Return the newest picture; cheap, never blocks."""
        ...

    def log_trouble(self) -> str:
        """Say why the log does not write, or return an empty text."""
        ...

    def order(self, text: str) -> str:
        """Take a typed order; return what was done with it, one line. Raises InputError."""
        ...

    def beat(self) -> None:
        """Give a sign of life: without one the drive permits lapse. Never blocks."""
        ...

    def stop(self, source: str) -> None:
        """All-stop, now; never blocks."""
        ...

    def clear(self, stop_number: int, source: str) -> None:
        """Lift the all-stop of this number. Raises InputError where it is not the newest."""
        ...
