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

    def stop(self, source: str) -> None:
        """All-stop, now; never blocks."""
        ...

    def clear(self, stop_number: int, source: str) -> None:
        """Lift the all-stop of this number. Raises InputError where it is not the newest."""
        ...
